import type { MotionWindow } from './motion-record.js';
import {
  fitBlocks,
  FULL_PARAMETERS,
  motionModel,
  addNormalEquations,
  PRODUCT_SUMS,
  type BlockFit,
  type MotionModel,
} from './motion-regression.js';
import { weightedSum, type PlantFigures } from './plant-figures.js';
import { plantAt, windowSums, WindowScratch, type OutputErrorPlant } from './output-error.js';
import { solvePositive } from './symmetric.js';

/** The data of an output-error fit. */
export interface OutputErrorProblem {
  /** mm, NaN where missing. */
  readonly position: Float64Array;
  /** %, without holes inside the windows. */
  readonly output: Float64Array;
  /** T, s. */
  readonly sampleTime: number;
  readonly windows: readonly MotionWindow[];
  /** About every how many samples one is looked at; 1 where not given. */
  readonly stride?: number;
}

export interface OutputErrorFit {
  readonly problem: OutputErrorProblem;
  readonly plant: OutputErrorPlant;
  readonly fit: BlockFit;
  readonly figures: PlantFigures;
  /** Relative changes of K and α over the record with their standard errors; null where not asked for. */
  readonly trends: { readonly gain: Trend; readonly pole: Trend } | null;
  /** Sum of squared position residuals, mm². */
  readonly square: number;
}

export interface Trend {
  readonly value: number;
  readonly deviation: number;
}

/** Poles at which the search begins, rad/s, as far as the sampling shows them. */
const FIRST_POLES = Array.from({ length: 14 }, (_, i) => 0.3 * 1.8 ** i);
/** Dead times at which the search begins, samples. */
const FIRST_DELAYS = [0, 2, 5, 10];
/** Samples of motion that the search for a start looks at. */
const FIRST_SAMPLES = 6_000;
/** Longest dead time considered, s. */
const LONGEST_DELAY = 0.06;
const MOST_STEPS = 30;
const UNIT_PLANT = {
  gainForward: 1,
  gainReverse: 1,
  dragForward: 0,
  dragReverse: 0,
  gainTrend: 0,
  poleTrend: 0,
} as const;

interface Evaluated {
  readonly plant: OutputErrorPlant;
  /** Packed sums, window by window. */
  readonly sums: Float64Array;
  /** Normal equations of the free parameters over all windows. */
  readonly matrix: Float64Array;
  readonly vector: Float64Array;
  /** Square sum that the best linear parameters leave. */
  readonly square: number;
}

/** Which parameters of a fit are free. */
interface FreeParameters {
  /** α, K, c and τ. */
  readonly motion: MotionModel;
  /** Columns of K's and α's trend, or −1. */
  readonly gainTrend: number;
  readonly poleTrend: number;
  /** All columns, and those that are linear: K and c. */
  readonly parameters: number;
  readonly linear: readonly number[];
}

/** Where a search found its best α and τ, K and c being linear. */
export interface SearchResult {
  readonly plant: OutputErrorPlant;
  /** Whether its gains are those of a plant that follows its output. */
  readonly positive: boolean;
}

/** A start for the Gauss–Newton search; null when the windows do not tell K and c apart. */
export function searchStart(problem: OutputErrorProblem): SearchResult | null {
  const some = { ...problem, windows: sampleOfWindows(problem.windows) };
  const free = freeParameters(some, { delayHeld: true });
  let best: Evaluated | null = null;
  for (const pole of FIRST_POLES) {
    if (pole * problem.sampleTime > 1) break;
    for (const samples of FIRST_DELAYS) {
      const deadTime = samples * problem.sampleTime;
      if (deadTime > LONGEST_DELAY) break;
      const start = { ...UNIT_PLANT, pole, deadTime };
      const evaluated = evaluate(some, free, start, false);
      if (evaluated && (!best || evaluated.square < best.square)) best = evaluated;
    }
  }
  if (!best) return null;
  return { plant: best.plant, positive: best.plant.gainForward > 0 && best.plant.gainReverse > 0 };
}

/** Which parameters of a fit are free. */
interface FreeParameters {
  /** α, K, c and τ. */
  readonly motion: MotionModel;
  /** Columns of K's and α's trend, or −1. */
  readonly gainTrend: number;
  readonly poleTrend: number;
  /** All columns, and those that are linear: K and c. */
  readonly parameters: number;
  readonly linear: readonly number[];
}

/** What a fit may vary beside α, K, f and b. */
export interface FitChoice {
  /** K⁺ and K⁻ apart, where both directions occur. */
  readonly directional?: boolean;
  /** K and α change linearly over the record. */
  readonly trend?: boolean;
  /** τ stays as it is in the start. */
  readonly delayHeld?: boolean;
}

/**
 * Gauss–Newton from a start; a step that does not lower the square sum is halved.
 *
 * @returns null when the windows do not tell the parameters apart.
 */
export function fitOutputError(
  problem: OutputErrorProblem,
  start: OutputErrorPlant,
  choice: FitChoice = {},
): OutputErrorFit | null {
  const free = freeParameters(problem, choice);
  const T = problem.sampleTime;
  const all = Array.from({ length: free.parameters }, (_, c) => c);
  const withoutDelay = all.filter((c) => c !== free.motion.delayIndex);
  let now = evaluate(problem, free, start);
  if (!now) return null;
  for (let step = 0; step < MOST_STEPS; step++) {
    const { plant } = now;
    let delta = solve(now.matrix, now.vector, free.parameters, all);
    // No output acts before it is computed: at τ = 0 the others go on alone.
    if (delta && plant.deadTime <= 0 && delta[free.motion.delayIndex]! < 0)
      delta = solve(now.matrix, now.vector, free.parameters, withoutDelay);
    if (!delta) return null;
    let share = reachOf(free, plant, delta, T);
    let next: Evaluated | null = null;
    for (let half = 0; half < 12 && !next; half++, share /= 2) {
      const tried = evaluate(problem, free, stepped(free, plant, delta, share));
      if (tried && tried.square <= now.square) next = tried;
    }
    if (!next) break;
    const settled =
      Math.abs(Math.log(next.plant.pole / plant.pole)) < 1e-6 &&
      Math.abs(next.plant.deadTime - plant.deadTime) < 1e-5 * T &&
      now.square - next.square <= 1e-9 * now.square;
    now = next;
    if (settled) break;
  }
  const { plant } = now;
  if (!(plant.gainForward > 0 && plant.gainReverse > 0)) return null;
  if (!choice.delayHeld && plant.deadTime <= 0)
    return fitOutputError(problem, plant, { ...choice, delayHeld: true });
  // Sums once more where the linear parameters ended, for scores without a remainder.
  const last = evaluate(problem, free, plant);
  if (!last) return null;
  const offsets = problem.windows.map((_, i) => i * PRODUCT_SUMS);
  const fit = fitBlocks(
    { ...free.motion, parameters: free.parameters },
    last.sums,
    offsets,
    offsets.map(() => 1),
    (block) => mapAt(free, plant, alongOf(problem, block)),
  );
  if (!fit) return null;
  const trend = (value: number, column: number): Trend => ({
    value,
    deviation: Math.sqrt(fit.covariance[column * (free.parameters + 1)]!),
  });
  return {
    problem,
    plant,
    fit,
    figures: figuresOf(free, plant),
    trends:
      free.gainTrend < 0
        ? null
        : { gain: trend(plant.gainTrend, free.gainTrend), pole: trend(plant.poleTrend, free.poleTrend) },
    square: last.square,
  };
}

/**
 * A share of a step. The time constant 1/α takes it, not α: a lag of the output shows as 1/α + τ, so along the
 * valley in which steps run both are nearly linear.
 */
function stepped(
  free: FreeParameters,
  plant: OutputErrorPlant,
  delta: Float64Array,
  share: number,
): OutputErrorPlant {
  const part = (column: number): number => (column < 0 ? 0 : share * delta[column]!);
  const deadTime = plant.deadTime + part(free.motion.delayIndex);
  return {
    ...plant,
    pole: 1 / (1 / plant.pole - part(0) / plant.pole ** 2),
    // A share that just reaches 0 must not miss it by rounding.
    deadTime: deadTime < 1e-12 ? 0 : deadTime,
    gainTrend: plant.gainTrend + part(free.gainTrend),
    poleTrend: plant.poleTrend + part(free.poleTrend),
  };
}

/** The largest share of a step, at most 1, that keeps every parameter where the plant makes sense. */
function reachOf(
  free: FreeParameters,
  plant: OutputErrorPlant,
  delta: Float64Array,
  sampleTime: number,
): number {
  let share = 1;
  const bound = (from: number, by: number, low: number, high: number): void => {
    if (from + by < low) share = Math.min(share, (low - from) / by);
    if (from + by > high) share = Math.min(share, (high - from) / by);
  };
  const constant = 1 / plant.pole;
  bound(constant, -delta[0]! * constant ** 2, Math.max(constant / 3, sampleTime / 3), 4 * constant);
  const { delayIndex } = free.motion;
  if (delayIndex >= 0) bound(plant.deadTime, delta[delayIndex]!, 0, LONGEST_DELAY);
  // Beyond ±1.5 one end of the record would come near zero.
  for (const [column, value] of [
    [free.gainTrend, plant.gainTrend],
    [free.poleTrend, plant.poleTrend],
  ] as const)
    if (column >= 0) bound(value, delta[column]!, -1.5, 1.5);
  return share;
}

/** Longest windows first, until they hold FIRST_SAMPLES. */
function sampleOfWindows(windows: readonly MotionWindow[]): MotionWindow[] {
  const byLength = [...windows].sort((a, b) => b.to - b.from - (a.to - a.from));
  const some: MotionWindow[] = [];
  const held = { '1': 0, '-1': 0 };
  for (const window of byLength) {
    if (held[window.direction] >= FIRST_SAMPLES / 2) continue;
    held[window.direction] += window.to - window.from;
    some.push(window);
  }
  return some;
}

/** Share of samples a direction needs to count as present. */
const DIRECTION_SHARE = 0.05;

function freeParameters(problem: OutputErrorProblem, choice: FitChoice): FreeParameters {
  let forward = 0;
  let all = 0;
  for (const { from, to, direction } of problem.windows) {
    all += to - from;
    if (direction > 0) forward += to - from;
  }
  const motion = motionModel(
    forward >= DIRECTION_SHARE * all,
    all - forward >= DIRECTION_SHARE * all,
    choice.directional ?? false,
    choice.delayHeld ? 0 : null,
  );
  let p = motion.parameters;
  const linear = Array.from({ length: p }, (_, c) => c).filter((c) => c !== 0 && c !== motion.delayIndex);
  const trend = choice.trend ?? false;
  return {
    motion,
    gainTrend: trend ? p++ : -1,
    poleTrend: trend ? p++ : -1,
    parameters: p,
    linear,
  };
}

/** Where a window's middle lies in the record, −½ … ½. */
function alongOf({ windows, position }: OutputErrorProblem, block: number): number {
  const { from, to } = windows[block]!;
  return (from + to) / (2 * position.length) - 0.5;
}

/**
 * ∂(full parameters of a window)/∂(free parameters): α_w = α(1 + ρs), K_w = K(1 + κs), c_w = c(1 + κs) for a window
 * at s along the record.
 */
function mapAt(free: FreeParameters, plant: OutputErrorPlant, along: number): Float64Array {
  const { motion, parameters: p } = free;
  const here = plantAt(plant, along);
  const scale = [here.pole / plant.pole, ...Array.from({ length: 4 }, () => 1 + plant.gainTrend * along), 1];
  const map = new Float64Array(FULL_PARAMETERS * p);
  for (let row = 0; row < FULL_PARAMETERS; row++)
    for (let c = 0; c < motion.parameters; c++)
      map[row * p + c] = scale[row]! * motion.map[row * motion.parameters + c]!;
  if (free.poleTrend >= 0) map[free.poleTrend] = along * plant.pole;
  if (free.gainTrend >= 0) {
    const values = [plant.gainForward, plant.gainReverse, plant.dragForward, plant.dragReverse];
    values.forEach((value, i) => (map[(i + 1) * p + free.gainTrend] = along * value));
  }
  return map;
}

/** Sums at `plant`, and `plant` with the best K and c for its α, τ and trends. */
function evaluate(
  problem: OutputErrorProblem,
  free: FreeParameters,
  plant: OutputErrorPlant,
  derivatives = true,
): Evaluated | null {
  const { position, output, sampleTime, windows } = problem;
  const scratch = new WindowScratch(Math.max(...windows.map(({ from, to }) => to - from)));
  const sums = new Float64Array(windows.length * PRODUCT_SUMS);
  const p = free.parameters;
  const matrix = new Float64Array(p * p);
  const vector = new Float64Array(p);
  let square = 0;
  let map: Float64Array | undefined;
  windows.forEach((window, i) => {
    const along = alongOf(problem, i);
    const offset = i * PRODUCT_SUMS;
    windowSums(
      position,
      output,
      sampleTime,
      window,
      plantAt(plant, along),
      scratch,
      sums,
      offset,
      derivatives,
      problem.stride,
    );
    square += sums[offset + PRODUCT_SUMS - 1]!;
    if (!map || free.gainTrend >= 0) map = mapAt(free, plant, along);
    addNormalEquations({ parameters: p, map }, sums, offset, 1, matrix, vector);
  });
  const delta = solve(matrix, vector, p, free.linear);
  if (!delta) return null;
  free.linear.forEach((c) => (square -= delta[c]! * vector[c]!));
  const { motion } = free;
  const full = (row: number): number => {
    let s = 0;
    for (const c of free.linear) s += motion.map[row * motion.parameters + c]! * delta[c]!;
    return s;
  };
  return {
    plant: {
      ...plant,
      gainForward: plant.gainForward + full(1),
      gainReverse: plant.gainReverse + full(2),
      dragForward: plant.dragForward + full(3),
      dragReverse: plant.dragReverse + full(4),
    },
    sums,
    matrix,
    vector,
    square,
  };
}

/** Solution in the given columns, 0 in the others; null when they cannot be told apart. */
function solve(
  matrix: Float64Array,
  vector: Float64Array,
  p: number,
  columns: readonly number[],
): Float64Array | null {
  const n = columns.length;
  const part = new Float64Array(n * n);
  columns.forEach((row, i) => columns.forEach((c, j) => (part[i * n + j] = matrix[row * p + c]!)));
  const found = solvePositive(
    part,
    Float64Array.from(columns, (c) => vector[c]!),
    n,
    1e-13,
  );
  if (!found) return null;
  const delta = new Float64Array(p);
  columns.forEach((c, i) => (delta[c] = found[i]!));
  return delta;
}

/** K, α, f, b and τ of a plant with their gradients by the free parameters; f ± b = c±/K±. */
function figuresOf(free: FreeParameters, plant: OutputErrorPlant): PlantFigures {
  const { motion: model, parameters: p } = free;
  const row = (r: number): Float64Array => {
    const g = new Float64Array(p);
    g.set(model.map.subarray(r * model.parameters, (r + 1) * model.parameters));
    return g;
  };
  const { pole, gainForward, gainReverse, dragForward, dragReverse, deadTime } = plant;
  const gain = (gainForward + gainReverse) / 2;
  const resistForward = model.forward ? dragForward / gainForward : 0;
  const resistReverse = model.reverse ? dragReverse / gainReverse : 0;
  const gResistForward = weightedSum([1 / gainForward, row(3)], [-resistForward / gainForward, row(1)]);
  const gResistReverse = weightedSum([1 / gainReverse, row(4)], [-resistReverse / gainReverse, row(2)]);
  const both = model.forward && model.reverse;
  const half = both ? 0.5 : 1;
  const none = new Float64Array(p);
  return {
    lnGain: Math.log(gain),
    lnPole: Math.log(pole),
    gainForward,
    gainReverse,
    coulomb: half * (resistForward + resistReverse),
    bias: both ? 0.5 * (resistForward - resistReverse) : 0,
    delayShift: deadTime,
    gradients: {
      lnGain: weightedSum([0.5 / gain, row(1)], [0.5 / gain, row(2)]),
      lnPole: weightedSum([1 / pole, row(0)]),
      lnForward: weightedSum([1 / gainForward, row(1)]),
      lnReverse: weightedSum([1 / gainReverse, row(2)]),
      coulomb: weightedSum(
        [half, model.forward ? gResistForward : none],
        [half, model.reverse ? gResistReverse : none],
      ),
      bias: both ? weightedSum([0.5, gResistForward], [-0.5, gResistReverse]) : none,
      delayShift: model.delayIndex >= 0 ? row(5) : none,
    },
  };
}
