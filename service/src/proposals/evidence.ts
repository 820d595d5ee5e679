import { regionPlants } from '../control/limits.js';
import { recommendGains, type Recommendation } from '../control/recommendation.js';
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

/** The move at one corner of the estimate's 95 % region. */
export interface ExpectedCorner {
  /** (mm/s)/% */
  gain: number;
  /** rad/s */
  pole: number;
  /** With the gains of today: doing nothing. */
  before: ExpectedFigures;
  after: ExpectedFigures | null;
}

export interface Expected {
  before: ExpectedFigures & { trace: ExpectedTrace };
  after: (ExpectedFigures & { trace: ExpectedTrace }) | null;
  /** Worst of the estimate and the corners of its 95 % region, with the new gains. */
  worst: ExpectedFigures | null;
  /** The same for doing nothing; absent from proposals made before it was kept. */
  worstBefore?: ExpectedFigures;
  /** Each corner of the 95 % region; absent from proposals made before they were kept. */
  corners?: ExpectedCorner[];
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

type Tuning = Pick<CurrentTuning, 'gains' | 'structure'>;

/** The axis's own move on the plant as identified and on every corner of its 95 % region, with the gains of today and with the proposed ones. */
export function expectedOf(
  axis: Axis,
  estimate: PlantEstimate,
  current: Tuning,
  proposed: Tuning | null,
): Expected {
  const plant = plantOf(estimate);
  const region = { gain: estimate.gain, pole: estimate.pole };
  const controller = controllerOf(axis);
  const move = moveOf(axis);
  const plants = regionPlants(plant, region);
  const figures = (at: Plant, { gains, structure }: Tuning): ExpectedFigures => {
    const moved = simulateMove(at, gains, structure, controller, move, { output: at.bias ?? 0 });
    const { value } = sampledMaxSensitivity(at, gains, controller.sampleTime, 0);
    return {
      peakFollowingError: moved.peakFollowingError,
      rmsFollowingError: moved.rmsFollowingError,
      peakOutput: moved.peakOutput,
      saturatedPct: moved.saturatedPct,
      maxSensitivity: Number.isFinite(value) ? value : null,
    };
  };
  const all = plants.map((at) => ({
    gain: at.gain,
    pole: at.pole,
    before: figures(at, current),
    after: proposed && figures(at, proposed),
  }));
  const [nominal, ...corners] = all;
  const trace = ({ gains, structure }: Tuning): ExpectedTrace =>
    traceOf(
      simulateMove(plant, gains, structure, controller, move, { output: plant.bias ?? 0 }),
      controller.sampleTime,
    );
  return {
    before: { ...nominal!.before, trace: trace(current) },
    after: proposed && { ...nominal!.after!, trace: trace(proposed) },
    worst: proposed && worstOf(all.map(({ after }) => after!)),
    worstBefore: worstOf(all.map(({ before }) => before)),
    corners,
  };
}

/** The worst, figure by figure; a loop that is not stable anywhere has no Ms. */
function worstOf(figures: readonly ExpectedFigures[]): ExpectedFigures {
  const worst = (name: Exclude<keyof ExpectedFigures, 'maxSensitivity'>): number =>
    Math.max(...figures.map((at) => at[name]));
  const sensitivities = figures.flatMap(({ maxSensitivity }) => maxSensitivity ?? []);
  return {
    peakFollowingError: worst('peakFollowingError'),
    rmsFollowingError: worst('rmsFollowingError'),
    peakOutput: worst('peakOutput'),
    saturatedPct: worst('saturatedPct'),
    maxSensitivity: sensitivities.length === figures.length ? Math.max(...sensitivities) : null,
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
