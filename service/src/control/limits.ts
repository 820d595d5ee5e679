import {
  type Controller,
  checkController,
  checkMove,
  type Move,
  moveFigures,
  type MoveFigures,
  moveTrajectory,
  SATURATED_FROM,
  simulateLoop,
  type Trajectory,
} from './move.js';
import { checkPlant, type Plant, requirePositive } from './plant.js';
import {
  checkPattern,
  type Gains,
  patternAt,
  patternDamping,
  patternFrequency,
  placeGains,
  type PolePattern,
  type Structure,
} from './pole-placement.js';
import { outputRipple, poleDamping, sampledPoles } from './sampled-loop.js';
import { sampledMaxSensitivity } from './sampled-margins.js';

/** The 95 % region of an estimate as a box; its four corners are checked beside the estimate itself. */
export interface PlantRegion {
  gain: { low: number; high: number };
  pole: { low: number; high: number };
}

/** What the axis must keep to. */
export interface Tolerances {
  /** Largest |r − y| on the axis's own move, mm. */
  followingError: number;
  /** Largest RMS output ripple from the resolution while holding, %; 1 when absent (common practice, no source). */
  ripplePct?: number;
  /** Largest Ms of the loop with all delays; 2 when absent (Åström & Hägglund recommend 1.2 … 2.0). */
  maxSensitivity?: number;
  /**
   * Smallest damping ratio of the sampled loop; when absent 0.3, or 0.6 of the pattern's own damping where that
   * is less (common practice, no source).
   */
  damping?: number;
}

/** An axis with a pattern to be made faster or slower. */
export interface LimitQuestion {
  /** The estimate: gains are placed for it. Friction, bias and dead time count in every check. */
  plant: Plant;
  /** Absent: the estimate alone is checked. */
  region?: PlantRegion;
  structure: Structure;
  /** The commissioned pattern; its `patternFrequency` is the commissioned λ. */
  pattern: PolePattern;
  feedForward: boolean;
  controller: Controller;
  /** The axis's own move. */
  move: Move;
  tolerances: Tolerances;
}

export type LimitName =
  'output-headroom' | 'output-ripple' | 'sampled-damping' | 'sensitivity' | 'following-error';

export const LIMITS: readonly { name: LimitName; side: 'upper' | 'lower'; unit: string }[] = [
  { name: 'output-headroom', side: 'upper', unit: '%' },
  { name: 'output-ripple', side: 'upper', unit: '%' },
  { name: 'sampled-damping', side: 'upper', unit: '' },
  { name: 'sensitivity', side: 'upper', unit: '' },
  { name: 'following-error', side: 'lower', unit: 'mm' },
];

export interface LambdaLimit {
  name: LimitName;
  /** Which end of λ it normally bounds. */
  side: 'upper' | 'lower';
  /** λ where it starts to forbid on its side, rad/s; null when it does not within the searched range. */
  bound: number | null;
  /** The stretch of λ around the commissioned one that this limit alone allows; null when it allows none. */
  allowed: { low: number; high: number } | null;
  /** How far the commissioned λ is inside the bound, as a ratio: above 1 inside; null without a bound. */
  margin: number | null;
  /** The quantity at the commissioned λ, worst of the estimate and its corners; Infinity when not stable. */
  value: number;
  /** What the quantity may be: at most, for the damping at least. */
  threshold: number;
  unit: string;
}

export interface LambdaLimits {
  /** The commissioned λ, rad/s. */
  lambda: number;
  limits: LambdaLimit[];
  /** Where every limit allows λ, rad/s; null when nowhere. */
  allowed: { low: number; high: number } | null;
  /** What stops λ above and below; null when only the searched range does. */
  binding: { upper: LimitName | null; lower: LimitName | null };
  /** λ was looked at within these, rad/s. */
  searched: { low: number; high: number };
}

/** The estimate and the four corners of its region. */
export function regionPlants(plant: Plant, region?: PlantRegion): Plant[] {
  if (!region) return [plant];
  const { gain, pole } = region;
  return [
    plant,
    { ...plant, gain: gain.low, pole: pole.low },
    { ...plant, gain: gain.low, pole: pole.high },
    { ...plant, gain: gain.high, pole: pole.low },
    { ...plant, gain: gain.high, pole: pole.high },
  ];
}

/** Steps of the coarse search: λ·e^(0.25k), |k| ≤ 9, a factor of 9.5 either way. */
const COARSE_STEP = 0.25;
const COARSE_REACH = 9;
/** Halvings of a coarse step: bounds are good to 0.05 %. */
const HALVINGS = 9;

/**
 * The interval of λ that every limit of a real machine allows for the axis, and what binds at its ends.
 *
 * For a trial λ the gains are placed for the estimate on the pattern scaled to λ (`patternAt`) and judged on the
 * estimate and on every corner of its 95 % region, always the worst of them:
 *
 * - output headroom (upper): max |u| on the move below 99.9 % of the output limit, friction and bias included
 * - output ripple (upper): `outputRipple` at most the tolerance
 * - sampled damping (upper): smallest damping ratio of the sampled loop's poles at least the tolerance
 * - sensitivity (upper): Ms of the sampled loop with hold, output delay and dead time at most the tolerance
 * - following error (lower): max |r − y| on the move at most the tolerance
 *
 * The move starts from an axis that holds, its integrator at the bias. Each limit is looked at on a coarse
 * logarithmic grid around the commissioned λ; the ends of its own stretch are then bisected. The allowed interval
 * is the intersection of those stretches. A limit need not be monotonic: the stretch taken is the one around (or
 * nearest to) the commissioned λ, or around the nearest λ that every limit allows.
 *
 * @throws UnphysicalInputError naming the field
 */
export function lambdaLimits(question: LimitQuestion): LambdaLimits {
  const judge = new Judge(question);
  const lambda = patternFrequency(question.pattern);
  const grid: { lambda: number; held: boolean[] }[] = [];
  for (let k = -COARSE_REACH; k <= COARSE_REACH; k++) {
    const at = lambda * Math.exp(COARSE_STEP * k);
    // a pole faster than the Nyquist frequency cannot be sampled at all
    if (k > 0 && at * question.controller.sampleTime > Math.PI) break;
    grid.push({ lambda: at, held: LIMITS.map(({ name }) => judge.holds(name, at)) });
  }
  const here = COARSE_REACH;
  const distance = (i: number): number => Math.abs(i - here);
  const anchor = nearest(grid, (g) => g.held.every(Boolean), distance) ?? here;

  const limits = LIMITS.map(({ name, side, unit }, i): LambdaLimit => {
    const allowed = stretch(grid, i, anchor, (at) => judge.holds(name, at));
    const end = allowed === null ? null : side === 'upper' ? allowed.high : allowed.low;
    const edge = side === 'upper' ? grid[grid.length - 1]!.lambda : grid[0]!.lambda;
    const bound = end === edge ? null : end;
    return {
      name,
      side,
      bound,
      allowed,
      margin: bound === null ? null : side === 'upper' ? bound / lambda : lambda / bound,
      value: judge.worst(name, lambda),
      threshold: judge.threshold(name),
      unit,
    };
  });
  const searched = { low: grid[0]!.lambda, high: grid[grid.length - 1]!.lambda };
  return { lambda, limits, searched, ...intersection(limits, searched) };
}

function intersection(
  limits: readonly LambdaLimit[],
  searched: { low: number; high: number },
): Pick<LambdaLimits, 'allowed' | 'binding'> {
  let { low, high } = searched;
  let upper: LimitName | null = null;
  let lower: LimitName | null = null;
  for (const { name, side, allowed } of limits) {
    if (allowed === null) {
      // it forbids everything: name it on its own side
      if (side === 'upper') upper ??= name;
      else lower ??= name;
      high = -Infinity;
      continue;
    }
    if (allowed.high < high) {
      high = allowed.high;
      upper = name;
    }
    if (allowed.low > low) {
      low = allowed.low;
      lower = name;
    }
  }
  return { allowed: low <= high ? { low, high } : null, binding: { upper, lower } };
}

function nearest<T>(
  items: readonly T[],
  wanted: (item: T) => boolean,
  distance: (index: number) => number,
): number | null {
  let best: number | null = null;
  items.forEach((item, i) => {
    if (wanted(item) && (best === null || distance(i) < distance(best))) best = i;
  });
  return best;
}

/** The stretch of λ around the anchor (or nearest to it) where limit `i` holds, its ends bisected. */
function stretch(
  grid: readonly { lambda: number; held: boolean[] }[],
  i: number,
  anchor: number,
  holds: (lambda: number) => boolean,
): { low: number; high: number } | null {
  const seed = nearest(
    grid,
    (g) => g.held[i]!,
    (k) => Math.abs(k - anchor),
  );
  if (seed === null) return null;
  let first = seed;
  let last = seed;
  while (first > 0 && grid[first - 1]!.held[i]!) first--;
  while (last < grid.length - 1 && grid[last + 1]!.held[i]!) last++;
  const edge = (inside: number, outside: number | undefined): number => {
    let ok = inside;
    if (outside === undefined) return ok;
    let bad = outside;
    for (let n = 0; n < HALVINGS; n++) {
      const middle = Math.sqrt(ok * bad);
      if (holds(middle)) ok = middle;
      else bad = middle;
    }
    return ok;
  };
  return {
    low: edge(grid[first]!.lambda, grid[first - 1]?.lambda),
    high: edge(grid[last]!.lambda, grid[last + 1]?.lambda),
  };
}

/** One plant with the gains of one λ; every quantity is worked out once, when first asked for. */
class Trial {
  private move?: MoveFigures;
  private leastDamping?: number;

  constructor(
    private readonly q: LimitQuestion,
    private readonly plant: Plant,
    private readonly gains: Gains,
    private readonly trajectory: Trajectory,
  ) {}

  /** The quantity a limit is about; Infinity for ripple and Ms of a loop that is not stable. */
  quantity(name: LimitName): number {
    const { plant, gains } = this;
    const { sampleTime, outputDelaySamples: delay = 0, resolution = 0 } = this.q.controller;
    switch (name) {
      case 'output-headroom':
        return this.figures().peakOutput;
      case 'following-error':
        return this.figures().peakFollowingError;
      case 'sampled-damping':
        return this.damping();
      case 'output-ripple':
        return this.damping() > 0
          ? (outputRipple(plant, gains, sampleTime, delay, resolution) ?? Infinity)
          : Infinity;
      case 'sensitivity':
        return this.damping() > 0 ? sampledMaxSensitivity(plant, gains, sampleTime, delay).value : Infinity;
    }
  }

  private damping(): number {
    const { sampleTime, outputDelaySamples } = this.q.controller;
    this.leastDamping ??= Math.min(
      ...sampledPoles(this.plant, this.gains, sampleTime, outputDelaySamples).map(poleDamping),
    );
    return this.leastDamping;
  }

  private figures(): MoveFigures {
    if (!this.move) {
      const { structure, controller, move } = this.q;
      const start = { output: this.plant.bias ?? 0 };
      const trace = simulateLoop(this.plant, this.gains, structure, controller, this.trajectory, start);
      this.move = moveFigures(this.trajectory.target, trace, move.distance, controller.outputLimit);
    }
    return this.move;
  }
}

/** Judges every λ on the estimate and its corners. */
class Judge {
  private readonly thresholds: Record<LimitName, number>;
  private readonly plants: Plant[];
  private readonly trajectory: Trajectory;
  private readonly trials = new Map<number, Trial[]>();
  /** The plant that last broke a limit is asked first: it most likely breaks it again. */
  private readonly suspect = new Map<LimitName, number>();

  constructor(private readonly q: LimitQuestion) {
    checkPattern(q.pattern);
    checkController(q.controller);
    checkMove(q.move, q.controller.sampleTime);
    const t = q.tolerances;
    requirePositive('tolerances.followingError', t.followingError);
    requirePositive('tolerances.ripplePct', t.ripplePct ?? 1);
    requirePositive('tolerances.maxSensitivity', t.maxSensitivity ?? 2);
    requirePositive('tolerances.damping', t.damping ?? 0.3);
    this.plants = regionPlants(q.plant, q.region);
    this.plants.forEach(checkPlant);
    this.trajectory = moveTrajectory(q.move, q.controller.sampleTime);
    this.thresholds = {
      'output-headroom': SATURATED_FROM * (q.controller.outputLimit ?? 100),
      'output-ripple': t.ripplePct ?? 1,
      'sampled-damping': t.damping ?? Math.min(0.3, 0.6 * patternDamping(q.pattern)),
      sensitivity: t.maxSensitivity ?? 2,
      'following-error': t.followingError,
    };
  }

  threshold(name: LimitName): number {
    return this.thresholds[name];
  }

  /** Worst quantity of all plants at λ. */
  worst(name: LimitName, lambda: number): number {
    const all = this.at(lambda).map((trial) => trial.quantity(name));
    return name === 'sampled-damping' ? Math.min(...all) : Math.max(...all);
  }

  /** Whether a limit holds for every plant at λ. */
  holds(name: LimitName, lambda: number): boolean {
    const trials = this.at(lambda);
    const first = this.suspect.get(name) ?? 0;
    for (let n = 0; n < trials.length; n++) {
      const i = (first + n) % trials.length;
      if (this.within(name, trials[i]!.quantity(name))) continue;
      this.suspect.set(name, i);
      return false;
    }
    return true;
  }

  private within(name: LimitName, value: number): boolean {
    const threshold = this.thresholds[name];
    if (name === 'sampled-damping') return value >= threshold;
    return name === 'output-headroom' ? value < threshold : value <= threshold;
  }

  private at(lambda: number): Trial[] {
    let trials = this.trials.get(lambda);
    if (!trials) {
      const { plant, structure, pattern, feedForward } = this.q;
      const gains = placeGains(plant, structure, patternAt(pattern, lambda), feedForward);
      trials = this.plants.map((p) => new Trial(this.q, p, gains, this.trajectory));
      this.trials.set(lambda, trials);
    }
    return trials;
  }
}
