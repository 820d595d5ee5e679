import {
  lambdaLimits,
  type LambdaLimits,
  type LimitName,
  type LimitQuestion,
  regionPlants,
} from './limits.js';
import { type MoveFigures, simulateMove } from './move.js';
import { type Gains, patternAt, placeGains, type PolePattern, type Structure } from './pole-placement.js';

export interface Recommendation {
  /** `keep`: the commissioned λ; `nearest`: the nearest λ that no limit forbids; `none`: no gains. */
  verdict: 'keep' | 'nearest' | 'none';
  /** λ to run with, rad/s; null for `none`. */
  lambda: number | null;
  pattern: PolePattern | null;
  gains: Gains | null;
  /** Why, in a sentence. */
  reason: string;
  /** What else could be done; empty for `keep`. */
  waysOut: string[];
  limits: LambdaLimits;
}

const LIMIT_WORDS: Record<LimitName, string> = {
  'output-headroom': 'output headroom on its own move',
  'output-ripple': 'output ripple from the position resolution',
  'sampled-damping': 'damping of the sampled loop',
  sensitivity: 'maximum sensitivity with all delays',
  'following-error': 'following error on its own move',
};

const WAYS_OUT: Record<LimitName, string[]> = {
  'output-headroom': [
    'slow the move or shorten its distance',
    'repair what takes the force: friction, drag, supply pressure, bus voltage',
  ],
  'output-ripple': ['fit a finer encoder'],
  'sampled-damping': ['shorten the sample time or the output delay'],
  sensitivity: ['shorten the sample time, the output delay or the dead time'],
  'following-error': ['slow the move', 'use feed-forward', 'widen the following-error tolerance'],
};

/**
 * Gains for a drifted plant: the commissioned λ, pattern and structure are kept (the same behaviour on the drifted
 * plant); where a limit forbids that λ, the nearest λ that no limit forbids is taken and what binds is named; where
 * none is left, no gains are given and the reason and other ways out are.
 *
 * @throws UnphysicalInputError naming the field
 */
export function recommendGains(question: LimitQuestion): Recommendation {
  const limits = lambdaLimits(question);
  const { lambda, allowed, binding } = limits;
  if (allowed === null) {
    const names = [binding.upper, binding.lower].filter((n): n is LimitName => n !== null);
    return {
      verdict: 'none',
      lambda: null,
      pattern: null,
      gains: null,
      reason: noneReason(limits),
      waysOut: [...new Set(names.flatMap((n) => WAYS_OUT[n]))],
      limits,
    };
  }
  const inside = lambda >= allowed.low && lambda <= allowed.high;
  const chosen = inside ? lambda : lambda < allowed.low ? allowed.low : allowed.high;
  const pattern = inside ? question.pattern : patternAt(question.pattern, chosen);
  const gains = placeGains(question.plant, question.structure, pattern, question.feedForward);
  const common = { lambda: chosen, pattern, gains, limits };
  if (inside)
    return {
      ...common,
      verdict: 'keep',
      reason: `λ stays at ${inWords(lambda)} rad/s: no limit forbids it.`,
      waysOut: [],
    };
  const stops = lambda < allowed.low ? binding.lower : binding.upper;
  return {
    ...common,
    verdict: 'nearest',
    reason:
      `λ goes from ${inWords(lambda)} to ${inWords(chosen)} rad/s, the nearest that no limit forbids` +
      (stops ? `: ${LIMIT_WORDS[stops]} binds.` : '.'),
    waysOut: stops ? WAYS_OUT[stops] : [],
  };
}

function noneReason({ limits, binding }: LambdaLimits): string {
  const never = limits.filter((l) => l.allowed === null);
  if (never.length > 0)
    return `No λ is left: ${never.map((l) => LIMIT_WORDS[l.name]).join(' and ')} cannot be kept at any λ.`;
  return (
    `No λ is left: ${binding.upper ? LIMIT_WORDS[binding.upper] : 'the searched range'} asks for a lower λ than ` +
    `${binding.lower ? LIMIT_WORDS[binding.lower] : 'the searched range'} allows.`
  );
}

function inWords(lambda: number): string {
  return lambda.toPrecision(3);
}

export interface ExpectedMove {
  /** On the estimate. */
  nominal: MoveFigures;
  /** Worst of the estimate and the corners of its region, figure by figure. */
  worst: MoveFigures;
}

/**
 * The axis's own move on the drifted plant with the current and with the proposed gains, starting from an axis that
 * holds. `proposed` null gives `after` null.
 *
 * @throws UnphysicalInputError naming the field
 */
export function expectedMove(
  question: Pick<LimitQuestion, 'plant' | 'region' | 'controller' | 'move'>,
  current: { gains: Gains; structure: Structure },
  proposed: { gains: Gains; structure: Structure } | null,
): { before: ExpectedMove; after: ExpectedMove | null } {
  const plants = regionPlants(question.plant, question.region);
  const expect = ({ gains, structure }: { gains: Gains; structure: Structure }): ExpectedMove => {
    const all = plants.map((plant): MoveFigures => {
      const { peakFollowingError, rmsFollowingError, saturatedPct, overshoot, peakOutput } = simulateMove(
        plant,
        gains,
        structure,
        question.controller,
        question.move,
        { output: plant.bias ?? 0 },
      );
      return { peakFollowingError, rmsFollowingError, saturatedPct, overshoot, peakOutput };
    });
    const worst = (figure: keyof MoveFigures): number => Math.max(...all.map((f) => f[figure]));
    return {
      nominal: all[0]!,
      worst: {
        peakFollowingError: worst('peakFollowingError'),
        rmsFollowingError: worst('rmsFollowingError'),
        saturatedPct: worst('saturatedPct'),
        overshoot: worst('overshoot'),
        peakOutput: worst('peakOutput'),
      },
    };
  };
  return { before: expect(current), after: proposed === null ? null : expect(proposed) };
}
