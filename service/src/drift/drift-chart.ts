import type { PlantEstimate, WindowEstimate } from '../identification/plant-estimate.js';
import { cusumSignal, updateCusum, type CusumDesign } from './cusum.js';
import { ewmaHalfWidth, updateEwma } from './ewma.js';

/**
 * Drift of ln K and ln α of one axis.
 *
 * Phase I learns the spread σ of window estimates; the centre is the baseline, so a drift that is there
 * from the start is not learnt away. Phase II runs a tabular CUSUM and an EWMA whose indifference zone is
 * half of the tolerance: process levels inside it are acceptable (R. A. Freund, Acceptance control charts,
 * Industrial Quality Control 1957, from memory). A drift is decided when the chart signals and the pooled
 * estimate lies outside the tolerance with its whole 95 % interval.
 */
export type DriftQuantity = 'gain' | 'pole';
export type DriftState = 'learning' | 'in-control' | 'signal' | 'drifted';

/** Windows of Phase I. */
export const LEARNING_WINDOWS = 8;
/** How many windows' worth the windows' own variances count beside the observed spread. */
const PRIOR_WINDOWS = 6;
/** Spread below which window estimates are not trusted to differ: model error (common practice, no source). */
const LEAST_SPREAD = { gain: 0.004, pole: 0.008 } as const;
const CUSUM_REFERENCE = 0.5;
const CUSUM_DECISION = 5;
const EWMA_WEIGHT = 0.2;
const EWMA_WIDTH = 3;
/** Share of the tolerance within which the pooled estimate must come back before a decision is lifted. */
const DEADBAND = 0.8;
/** A window this many times less certain than the learnt spread is left out. */
const USELESS_WINDOW = 6;

/** Chart of one quantity: numbers only, ready to be stored as JSON. */
export interface QuantityChart {
  /** ln of the baseline; null until Phase I has found one. */
  centre: number | null;
  /** Tolerance as a share: 0.15 is ±15 %. */
  tolerance: number;
  /** Standard deviation of a window estimate; 0 while learning. */
  sigma: number;
  windows: number;
  /** Phase I: sums of the windows' ln values, of their moving ranges and of their own variances. */
  sum: number;
  sumRange: number;
  sumVariance: number;
  last: number;
  cusumHigh: number;
  cusumLow: number;
  ewma: number;
  drifted: boolean;
  /** Window number (1 = first after the start) at which the present state began. */
  since: number;
  state: DriftState;
}

export interface DriftChart {
  gain: QuantityChart;
  pole: QuantityChart;
}

/** What the chart says of one quantity after a window. */
export interface DriftDecision {
  readonly quantity: DriftQuantity;
  readonly state: DriftState;
  /** Which way; 0 when in control or learning. */
  readonly direction: -1 | 0 | 1;
  /** Window number at which this state began. */
  readonly since: number;
  /** Window number now. */
  readonly window: number;
  /** This window's value ÷ baseline; null without a baseline yet. */
  readonly ratio: number | null;
  /** Pooled estimate ÷ baseline with its interval. */
  readonly pooledRatio: { readonly value: number; readonly low: number; readonly high: number } | null;
  /** EWMA and its limits, as ratios to the baseline. */
  readonly ewma: number | null;
  readonly lowerLimit: number | null;
  readonly upperLimit: number | null;
  /** The larger CUSUM against its decision interval: 1 signals. */
  readonly cusumShare: number;
}

/**
 * A new chart, to be made after commissioning, an accepted tuning or a new baseline.
 *
 * @param baseline K and α at commissioning; null lets Phase I find the centre.
 * @param tolerances in %.
 */
export function createDriftChart(
  baseline: { gain: number; pole: number } | null,
  tolerances: { gainPct: number; polePct: number },
): DriftChart {
  const chart = (centre: number | null, pct: number): QuantityChart => ({
    centre,
    tolerance: pct / 100,
    sigma: 0,
    windows: 0,
    sum: 0,
    sumRange: 0,
    sumVariance: 0,
    last: 0,
    cusumHigh: 0,
    cusumLow: 0,
    ewma: 0,
    drifted: false,
    since: 0,
    state: 'learning',
  });
  return {
    gain: chart(baseline && Math.log(baseline.gain), tolerances.gainPct),
    pole: chart(baseline && Math.log(baseline.pole), tolerances.polePct),
  };
}

/** Takes one window into the chart (which is changed) and says where both quantities stand. */
export function updateDriftChart(
  chart: DriftChart,
  window: WindowEstimate,
  pooled: PlantEstimate | null,
): DriftDecision[] {
  return [
    updateQuantity(chart.gain, 'gain', window.lnGain, window.covariance.gain, pooled),
    updateQuantity(chart.pole, 'pole', window.lnPole, window.covariance.pole, pooled),
  ];
}

function updateQuantity(
  chart: QuantityChart,
  quantity: DriftQuantity,
  value: number,
  variance: number,
  pooled: PlantEstimate | null,
): DriftDecision {
  const useless = chart.sigma > 0 && variance > (USELESS_WINDOW * chart.sigma) ** 2;
  if (!useless && Number.isFinite(value) && Number.isFinite(variance)) {
    chart.windows++;
    if (chart.sigma === 0) learn(chart, quantity, value, variance);
    else follow(chart, value);
  }
  let direction = signalOf(chart);
  const interval = pooled?.verdict === 'usable' ? pooled[quantity] : null;
  if (chart.centre !== null && interval) {
    const base = Math.exp(chart.centre);
    const low = interval.low / base;
    const high = interval.high / base;
    const outside = low > 1 + chart.tolerance ? 1 : high < 1 - chart.tolerance ? -1 : 0;
    const inside = Math.abs(interval.value / base - 1) < DEADBAND * chart.tolerance;
    if (chart.drifted && inside) chart.drifted = false;
    else if (!chart.drifted && outside !== 0 && outside === direction) chart.drifted = true;
    if (chart.drifted && direction === 0) direction = interval.value > base ? 1 : -1;
  }
  const state: DriftState =
    chart.sigma === 0 ? 'learning' : chart.drifted ? 'drifted' : direction !== 0 ? 'signal' : 'in-control';
  if (state !== chart.state) {
    chart.state = state;
    chart.since = chart.windows;
  }
  return decisionOf(chart, quantity, direction, value, interval);
}

/** Mean moving range of two normal observations in standard deviations, d₂ = 2/√π. */
const RANGE_OF_TWO = 2 / Math.sqrt(Math.PI);

/**
 * Phase I: σ = mean moving range / d₂ (Shewhart's chart for individuals), which one step during learning
 * hardly moves, steadied by the windows' own variances as `PRIOR_WINDOWS` further windows.
 */
function learn(chart: QuantityChart, quantity: DriftQuantity, value: number, variance: number): void {
  if (chart.windows > 1) chart.sumRange += Math.abs(value - chart.last);
  chart.last = value;
  chart.sum += value;
  chart.sumVariance += variance;
  if (chart.windows < LEARNING_WINDOWS) return;
  const n = chart.windows;
  const observed = chart.sumRange / (n - 1) / RANGE_OF_TWO;
  const own = chart.sumVariance / n;
  const spread = ((n - 1) * observed ** 2 + PRIOR_WINDOWS * own) / (n - 1 + PRIOR_WINDOWS);
  chart.sigma = Math.max(Math.sqrt(spread), LEAST_SPREAD[quantity]);
  chart.centre ??= chart.sum / n;
  chart.ewma = chart.sum / n;
}

/** ln of the tolerance's inner half: levels closer to the baseline are acceptable. */
function indifference(chart: QuantityChart): number {
  return Math.log(1 + chart.tolerance) / 2;
}

function cusumDesign(chart: QuantityChart): CusumDesign {
  return {
    centre: 0,
    reference: Math.max(CUSUM_REFERENCE, indifference(chart) / chart.sigma),
    decision: CUSUM_DECISION,
  };
}

/** Phase II. */
function follow(chart: QuantityChart, value: number): void {
  const sums = updateCusum(
    { high: chart.cusumHigh, low: chart.cusumLow },
    cusumDesign(chart),
    (value - chart.centre!) / chart.sigma,
  );
  // Sums far beyond the decision would take as long to come back after a repair: they are capped.
  chart.cusumHigh = Math.min(sums.high, 2 * CUSUM_DECISION);
  chart.cusumLow = Math.min(sums.low, 2 * CUSUM_DECISION);
  chart.ewma = updateEwma(chart.ewma, EWMA_WEIGHT, value);
}

function ewmaReach(chart: QuantityChart): number {
  return (
    indifference(chart) +
    ewmaHalfWidth({ centre: 0, sigma: chart.sigma, weight: EWMA_WEIGHT, width: EWMA_WIDTH })
  );
}

function signalOf(chart: QuantityChart): -1 | 0 | 1 {
  if (chart.sigma === 0 || chart.centre === null) return 0;
  const byCusum = cusumSignal({ high: chart.cusumHigh, low: chart.cusumLow }, cusumDesign(chart));
  if (byCusum !== 0) return byCusum;
  const off = chart.ewma - chart.centre;
  if (Math.abs(off) <= ewmaReach(chart)) return 0;
  return off > 0 ? 1 : -1;
}

function decisionOf(
  chart: QuantityChart,
  quantity: DriftQuantity,
  direction: -1 | 0 | 1,
  value: number,
  interval: { value: number; low: number; high: number } | null,
): DriftDecision {
  const { centre } = chart;
  const base = centre === null ? 1 : Math.exp(centre);
  const learnt = chart.sigma > 0 && centre !== null;
  return {
    quantity,
    state: chart.state,
    direction: chart.state === 'signal' || chart.state === 'drifted' ? direction : 0,
    since: chart.since,
    window: chart.windows,
    ratio: centre === null ? null : Math.exp(value) / base,
    pooledRatio:
      centre === null || interval === null
        ? null
        : { value: interval.value / base, low: interval.low / base, high: interval.high / base },
    ewma: learnt ? Math.exp(chart.ewma) / base : null,
    lowerLimit: learnt ? Math.exp(-ewmaReach(chart)) : null,
    upperLimit: learnt ? Math.exp(ewmaReach(chart)) : null,
    cusumShare: learnt ? Math.max(chart.cusumHigh, chart.cusumLow) / CUSUM_DECISION : 0,
  };
}
