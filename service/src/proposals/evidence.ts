import {
  expectedMove,
  recommendGains,
  type ExpectedMove,
  type Recommendation,
} from '../control/recommendation.js';
import { sampledMaxSensitivity } from '../control/sampled-margins.js';
import { simulateMove, type Controller, type Move } from '../control/move.js';
import { patternFrequency, type Gains, type PolePattern, type Structure } from '../control/pole-placement.js';
import type { Plant } from '../control/plant.js';
import type { DriftDecision } from '../drift/drift-chart.js';
import type { Axis, Baseline, Tolerances } from '../fleet/axis.entity.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';

/** What was known when the proposal was made; frozen with it. */
export interface Evidence {
  /** ISO 8601 */
  at: string;
  baseline: Baseline;
  estimate: PlantEstimate;
  tolerances: Tolerances;
  /** The axis's own move: mm, s */
  move: { distance: number; duration: number };
  trail: { gainRatio: number; poleRatio: number }[];
  indicators: {
    peakFollowingError: number | null;
    rmsFollowingError: number | null;
    saturatedPct: number | null;
  } | null;
  decisions: { quantity: 'gain' | 'pole'; sentence: string }[];
}

/** What the axis runs with when the proposal is made. */
export interface CurrentTuning {
  revision: number;
  structure: Structure;
  pattern: PolePattern | null;
  lambda: number | null;
  feedForward: boolean;
  gains: Gains;
}

/** Figures of the axis's own move with one set of gains on the plant as identified. */
export interface ExpectedFigures {
  /** mm */
  peakFollowingError: number;
  /** mm */
  rmsFollowingError: number;
  /** % */
  peakOutput: number;
  /** % of samples */
  saturatedPct: number;
  /** Ms with all delays; null where the loop is not stable */
  maxSensitivity: number | null;
}

export interface ExpectedTrace {
  /** s */
  time: number[];
  /** mm */
  error: number[];
  /** % */
  output: number[];
}

export interface Expected {
  before: ExpectedFigures & { trace: ExpectedTrace };
  after: (ExpectedFigures & { trace: ExpectedTrace }) | null;
  /** Worst of the estimate and the corners of its 95 % region, with the new gains. */
  worst: ExpectedFigures | null;
}

/** Trace points sent to a page: enough for a chart, few enough to store with the proposal. */
const TRACE_POINTS = 400;

/** The controller as the axis runs it. */
export const controllerOf = (axis: Pick<Axis, 'sampleTime' | 'resolution'>): Controller => ({
  sampleTime: axis.sampleTime,
  resolution: axis.resolution,
});

export const moveOf = ({ move }: Pick<Axis, 'move'>): Move => ({
  ...move,
  settle: 1,
  profile: 'raised-cosine',
});

/** The plant that gains are placed for: the estimate, with friction, bias and dead time. */
export const plantOf = (estimate: PlantEstimate): Plant => ({
  gain: estimate.gain.value,
  pole: estimate.pole.value,
  deadTime: Math.max(0, estimate.deadTime),
  coulomb: Math.max(0, estimate.coulomb.value),
  bias: estimate.bias.value,
});

/** Gains for the plant as identified, inside every limit; see `recommendGains`. */
export function recommend(
  axis: Axis,
  estimate: PlantEstimate,
  wanted: { structure: Structure; pattern: PolePattern; feedForward: boolean },
): Recommendation {
  return recommendGains({
    plant: plantOf(estimate),
    region: { gain: estimate.gain, pole: estimate.pole },
    ...wanted,
    controller: controllerOf(axis),
    move: moveOf(axis),
    tolerances: { followingError: axis.tolerances.followingError },
  });
}

/** The axis's own move on the plant as identified, with the gains of today and with the proposed ones. */
export function expectedOf(
  axis: Axis,
  estimate: PlantEstimate,
  current: { gains: Gains; structure: Structure },
  proposed: { gains: Gains; structure: Structure } | null,
): Expected {
  const plant = plantOf(estimate);
  const region = { gain: estimate.gain, pole: estimate.pole };
  const controller = controllerOf(axis);
  const move = moveOf(axis);
  const { before, after } = expectedMove({ plant, region, controller, move }, current, proposed);
  const sensitivity = ({ gains }: { gains: Gains }): number | null => {
    const { value } = sampledMaxSensitivity(plant, gains, controller.sampleTime, 0);
    return Number.isFinite(value) ? value : null;
  };
  const figures = (moves: ExpectedMove['nominal'], maxSensitivity: number | null): ExpectedFigures => ({
    peakFollowingError: moves.peakFollowingError,
    rmsFollowingError: moves.rmsFollowingError,
    peakOutput: moves.peakOutput,
    saturatedPct: moves.saturatedPct,
    maxSensitivity,
  });
  const trace = ({ gains, structure }: { gains: Gains; structure: Structure }): ExpectedTrace =>
    traceOf(
      simulateMove(plant, gains, structure, controller, move, { output: plant.bias ?? 0 }),
      controller.sampleTime,
    );
  return {
    before: { ...figures(before.nominal, sensitivity(current)), trace: trace(current) },
    after: after && proposed && { ...figures(after.nominal, sensitivity(proposed)), trace: trace(proposed) },
    worst: after && proposed && figures(after.worst, sensitivity(proposed)),
  };
}

function traceOf(move: ReturnType<typeof simulateMove>, sampleTime: number): ExpectedTrace {
  const { target } = move.trajectory;
  const { position, output } = move.trace;
  const step = Math.max(1, Math.ceil(target.length / TRACE_POINTS));
  const trace: ExpectedTrace = { time: [], error: [], output: [] };
  for (let i = 0; i < target.length; i += step) {
    trace.time.push(round(i * sampleTime, 5));
    trace.error.push(round(target[i]! - position[i]!, 6));
    trace.output.push(round(output[i]!, 4));
  }
  return trace;
}

const round = (value: number, digits: number): number => Number(value.toFixed(digits));

/** "Pole 4.10 → 2.60 rad/s (2.53 … 2.67), 37 % below baseline; tolerance ±20 %." */
export function decisionSentence(
  { quantity }: Pick<DriftDecision, 'quantity'>,
  baseline: Baseline,
  estimate: PlantEstimate,
  tolerances: Tolerances,
): string {
  const { value, low, high } = estimate[quantity];
  const base = baseline[quantity];
  const pct = 100 * (value / base - 1);
  const [name, unit, tolerance] =
    quantity === 'gain'
      ? ['Gain K', '(mm/s)/%', tolerances.gainPct]
      : ['Pole α', 'rad/s', tolerances.polePct];
  const digits = decimals(high - low);
  return `${name} ${base.toFixed(digits)} → ${value.toFixed(digits)} ${unit} (95 %: ${low.toFixed(digits)} … ${high.toFixed(digits)}), ${Math.abs(pct).toFixed(0)} % ${pct < 0 ? 'below' : 'above'} baseline; tolerance ±${tolerance} %.`;
}

/** Decimals that an interval of this width supports: two significant digits of the width. */
const decimals = (width: number): number =>
  width > 0 ? Math.min(4, Math.max(0, 1 - Math.floor(Math.log10(width)))) : 2;

export const lambdaOf = (pattern: PolePattern | null): number | null => pattern && patternFrequency(pattern);
