import {
  covarianceOf,
  describePlant,
  directionsDiffer,
  LEAST_MOTION,
  type PooledFit,
} from './describe-plant.js';
import { cutWindows, motionOf, spanVelocity, type Motion, type MotionRecord } from './motion-record.js';
import {
  fitOutputError,
  searchStart,
  type FitChoice,
  type OutputErrorFit,
  type OutputErrorProblem,
  type Trend,
} from './output-error-fit.js';
import { plantAt, windowResidual, WindowScratch, type OutputErrorPlant } from './output-error.js';
import type { PlantEstimate, Verdict } from './plant-estimate.js';

export type { MotionRecord } from './motion-record.js';

/** What a record says of its plant. */
export interface RecordIdentification {
  readonly verdict: Verdict;
  readonly remarks: readonly string[];
  readonly movingSeconds: number;
  /** Null when nothing could be estimated. */
  readonly estimate: PlantEstimate | null;
  readonly traces: RecordTraces;
}

/** On the record's grid, NaN where the fit does not speak. */
export interface RecordTraces {
  /** Averaged over a few samples, mm/s. */
  readonly measuredVelocity: Float32Array;
  /** The same average of the simulated position, mm/s. */
  readonly simulatedVelocity: Float32Array;
  /** Measured less simulated position, mm. */
  readonly positionResidual: Float32Array;
}

/** Windows that are made of a record with fewer. */
const LEAST_WINDOWS = 10;
/** Windows from which on a trend over the record is asked for. */
const TREND_WINDOWS = 12;
/** The search looks at every eighth sample; positions are sampled far above the plant's bandwidth. */
const ROUGH_STRIDE = 8;
/** A trend counts beyond this many standard errors and this relative change. */
const TREND = { deviations: 4, gain: 0.01, pole: 0.03 } as const;
/** A trend is constant inside a window, so windows are cut to this many time constants. */
const TREND_LENGTH = 8;
/** Residual in units of the encoder's noise from which on something else than noise disturbs. */
const DISTURBED = 3;
/** Samples of the shortest windows that longer ones are cut into. */
const SHORTEST_WINDOW = 40;
/** The equation is exact inside a window, but a trend is held there and need not be linear (common practice, no source). */
const EXACT = { lnGain: 0, lnPole: 0, friction: 0 };
const TREND_VARIANCE = { lnGain: 2e-4 ** 2, lnPole: 1e-3 ** 2, friction: 1e-3 ** 2 };
/** Output from which on it counts as clamped, %. */
const AT_LIMIT = 99.99;

/**
 * Identifies K, α, f, b and τ from a record by output error over its windows of steady direction
 * (`output-error.ts`), K by direction and a trend over the record where the data support them: the fullest model
 * first, then without what it does not need (Wald tests).
 */
export function identifyRecord(record: MotionRecord): RecordIdentification {
  const motion = motionOf(record);
  const T = record.sampleTime;
  const movingSamples = motion.windows.reduce((s, { from, to }) => s + to - from, 0);
  const whole: OutputErrorProblem = {
    position: record.position,
    output: motion.output,
    sampleTime: T,
    windows: motion.windows,
  };
  // Intervals come from how windows differ: a few long moves are cut into enough of them.
  const problem =
    motion.windows.length < LEAST_WINDOWS ? inWindowsOf(whole, (movingSamples * T) / LEAST_WINDOWS) : whole;
  const movingSeconds = movingSamples * T;
  const start = movingSeconds >= LEAST_MOTION ? searchStart({ ...problem, stride: ROUGH_STRIDE }) : null;
  const found = start?.positive ? chooseFit(problem, start.plant, motion.noise) : null;
  const traces = tracesOf(found?.problem ?? problem, motion, found);
  const description = describePlant(
    found && pooledFit(found, movingSamples, traces),
    { gain: 1, pole: 1, sampleTime: T, resolution: motion.noise },
    found?.plant.deadTime ?? 0,
    movingSeconds,
  );
  const remarks = [...description.remarks];
  if (movingSamples === 0) remarks.splice(0, 1, 'the axis never moves in this record');
  else if (start?.positive === false)
    remarks.splice(
      0,
      1,
      'the output does not drive this motion: look at the columns and at the sign of the output',
    );
  if (found) remarks.push(...trendRemarks(found));
  return {
    verdict: description.verdict,
    remarks,
    movingSeconds,
    estimate: found ? { ...description, remarks } : null,
    traces,
  };
}

function chooseFit(whole: OutputErrorProblem, start: OutputErrorPlant, noise: number): OutputErrorFit | null {
  const rough = fitOutputError({ ...whole, stride: ROUGH_STRIDE }, start);
  const plain = rough && fitOutputError(whole, rough.plant);
  if (!plain) return null;
  const full = fitOutputError(whole, plain.plant, {
    directional: true,
    trend: whole.windows.length >= TREND_WINDOWS,
  });
  const directional = full !== null && full.fit.model.directional && directionsDiffer(full.fit, full.figures);
  const trend = full !== null && trendsOf(full).length > 0;
  const choice = { directional, trend };
  const problem = trend ? inWindowsOf(whole, TREND_LENGTH / full.plant.pole) : whole;
  const chosen = directional || trend ? fitOutputError(problem, full.plant, choice) : plain;
  return againstDisturbances(chosen ?? plain, chosen ? choice : {}, noise);
}

/**
 * Friction that varies along the way, and whatever else pushes, adds up over a window: where the residual is well
 * above the encoder's noise, windows of one time constant are tried and kept if they tell ln K and ln α better.
 */
function againstDisturbances(first: OutputErrorFit, choice: FitChoice, noise: number): OutputErrorFit {
  const { problem, plant } = first;
  const samples = problem.windows.reduce((s, { from, to }) => s + to - from, 0);
  if (first.square < samples * (DISTURBED * noise) ** 2) return first;
  const shorter = fitOutputError(inWindowsOf(problem, 1 / plant.pole), plant, choice);
  const variance = ({ fit, figures: { gradients } }: OutputErrorFit): number =>
    covarianceOf(fit, gradients.lnGain, gradients.lnGain) +
    covarianceOf(fit, gradients.lnPole, gradients.lnPole);
  return shorter && variance(shorter) < variance(first) ? shorter : first;
}

function inWindowsOf(problem: OutputErrorProblem, seconds: number): OutputErrorProblem {
  const { sampleTime } = problem;
  const longest = Math.max(seconds, SHORTEST_WINDOW * sampleTime);
  return { ...problem, windows: cutWindows(problem.windows, sampleTime, longest) };
}

/** Which of the trends of a fit are real. */
function trendsOf({ trends }: OutputErrorFit): [name: string, trend: Trend][] {
  if (!trends) return [];
  const real = ({ value, deviation }: Trend, least: number): boolean =>
    Math.abs(value) > least && Math.abs(value) > TREND.deviations * deviation;
  return [
    ...(real(trends.gain, TREND.gain) ? [['the gain', trends.gain] as [string, Trend]] : []),
    ...(real(trends.pole, TREND.pole) ? [['the pole', trends.pole] as [string, Trend]] : []),
  ];
}

function trendRemarks(found: OutputErrorFit): string[] {
  return trendsOf(found).map(
    ([name, { value }]) =>
      `${name} ${value > 0 ? 'rose' : 'fell'} by ${Math.abs(100 * value).toFixed(0)} % over the record; the figures are means`,
  );
}

function pooledFit(
  { problem: { windows, output, sampleTime }, fit, figures, trends }: OutputErrorFit,
  samples: number,
  traces: RecordTraces,
): PooledFit {
  let atLimit = 0;
  let forward = 0;
  for (const { from, to, direction } of windows) {
    if (direction > 0) forward += to - from;
    for (let k = from; k < to; k++) if (Math.abs(output[k]!) >= AT_LIMIT) atLimit++;
  }
  return {
    fit,
    figures,
    method: trends ? TREND_VARIANCE : EXACT,
    movingSeconds: samples * sampleTime,
    atLimitShare: atLimit / samples,
    forwardShare: forward / samples,
    fitPct: fitPercent(traces),
  };
}

/** 100·(1 − ‖v − v̂‖/‖v − v̄‖) over the samples that have both. */
function fitPercent({ measuredVelocity: v, simulatedVelocity: simulated }: RecordTraces): number {
  let n = 0;
  let sum = 0;
  let square = 0;
  let miss = 0;
  for (let k = 0; k < v.length; k++) {
    const e = v[k]! - simulated[k]!;
    if (e !== e) continue;
    n++;
    sum += v[k]!;
    square += v[k]! * v[k]!;
    miss += e * e;
  }
  return 100 * (1 - Math.sqrt(miss / (square - (sum * sum) / n)));
}

function tracesOf(problem: OutputErrorProblem, motion: Motion, found: OutputErrorFit | null): RecordTraces {
  const { position, output, sampleTime, windows } = problem;
  const { reach } = motion;
  const n = position.length;
  const positionResidual = new Float32Array(n).fill(NaN);
  const simulatedVelocity = new Float32Array(n).fill(NaN);
  if (found) {
    const scratch = new WindowScratch(Math.max(...windows.map(({ from, to }) => to - from)));
    const simulated = new Float64Array(n).fill(NaN);
    for (const window of windows) {
      const along = (window.from + window.to) / (2 * n) - 0.5;
      windowResidual(position, output, sampleTime, window, plantAt(found.plant, along), scratch);
      for (let k = window.from; k < window.to; k++) {
        const r = scratch.residual[k - window.from]!;
        positionResidual[k] = r;
        simulated[k] = position[k]! - r;
      }
    }
    simulatedVelocity.set(spanVelocity(simulated, reach, sampleTime));
  }
  return { measuredVelocity: Float32Array.from(motion.velocity), simulatedVelocity, positionResidual };
}
