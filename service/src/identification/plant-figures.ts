import type { BlockFit, MotionModel } from './motion-regression.js';

/** The plant that a θ of the motion regression stands for. */
export interface PlantValues {
  readonly lnGain: number;
  readonly lnPole: number;
  readonly gainForward: number;
  readonly gainReverse: number;
  readonly coulomb: number;
  readonly bias: number;
  /** Δτ, s. */
  readonly delayShift: number;
}

/** The plant of a fit, with the gradients that carry the covariance of θ to each figure. */
export interface PlantFigures extends PlantValues {
  readonly gradients: {
    readonly lnGain: Float64Array;
    readonly lnPole: Float64Array;
    readonly lnForward: Float64Array;
    readonly lnReverse: Float64Array;
    readonly coulomb: Float64Array;
    readonly bias: Float64Array;
    readonly delayShift: Float64Array;
  };
}

/** A full parameter: its row of the map times θ. */
function fullParameter({ map, parameters }: MotionModel, theta: Float64Array, row: number): number {
  let s = 0;
  for (let j = 0; j < parameters; j++) s += map[row * parameters + j]! * theta[j]!;
  return s;
}

/**
 * From θ to K, α, f, b, Δτ: α = −ln(1 − α̃T)/T, K = β/α̃, f ± b = c±/β±. Where the directions have gains of
 * their own, K is their mean. With one direction of travel only, f stands for f ± b and b for 0.
 *
 * @returns null when θ is no plant (α̃ ≤ 0, α̃T ≥ 1 or a gain ≤ 0).
 */
export function plantValues(model: MotionModel, theta: Float64Array, sampleTime: number): PlantValues | null {
  const full = (row: number): number => fullParameter(model, theta, row);
  const alpha = full(0);
  const betaF = full(1);
  const betaR = full(2);
  if (!(alpha > 0) || !(alpha * sampleTime < 1) || !(betaF > 0) || !(betaR > 0)) return null;
  const gainForward = betaF / alpha;
  const gainReverse = betaR / alpha;
  const resistF = model.forward ? full(3) / betaF : 0;
  const resistR = model.reverse ? full(4) / betaR : 0;
  const both = model.forward && model.reverse;
  return {
    lnGain: Math.log((gainForward + gainReverse) / 2),
    lnPole: Math.log(-Math.log(1 - alpha * sampleTime) / sampleTime),
    gainForward,
    gainReverse,
    coulomb: (both ? 0.5 : 1) * (resistF + resistR),
    bias: both ? 0.5 * (resistF - resistR) : 0,
    delayShift: model.delayIndex >= 0 ? (2 * full(5)) / (betaF + betaR) : model.heldDelay,
  };
}

/** `plantValues` of a fit with their gradients by θ. */
export function plantFigures(fit: BlockFit, sampleTime: number): PlantFigures | null {
  const { model, theta } = fit;
  const values = plantValues(model, theta, sampleTime);
  if (!values) return null;
  const p = model.parameters;
  const full = (row: number): number => fullParameter(model, theta, row);
  const row = (r: number): Float64Array => model.map.slice(r * p, r * p + p);
  const { gainForward, gainReverse, delayShift } = values;
  const alpha = full(0);
  const betaF = full(1);
  const betaR = full(2);
  const [gAlpha, gF, gR] = [row(0), row(1), row(2)];
  const lnForward = weightedSum([1 / betaF, gF], [-1 / alpha, gAlpha]);
  const lnReverse = weightedSum([1 / betaR, gR], [-1 / alpha, gAlpha]);
  const both = gainForward + gainReverse;
  const none = new Float64Array(p);
  const resist = (here: boolean, r: number, beta: number, gBeta: Float64Array): Float64Array =>
    here ? weightedSum([1 / beta, row(r)], [-full(r) / beta ** 2, gBeta]) : none;
  const gResistF = resist(model.forward, 3, betaF, gF);
  const gResistR = resist(model.reverse, 4, betaR, gR);
  const twoWays = model.forward && model.reverse;
  const half = twoWays ? 0.5 : 1;
  const beta = (betaF + betaR) / 2;
  return {
    ...values,
    gradients: {
      lnGain: weightedSum([gainForward / both, lnForward], [gainReverse / both, lnReverse]),
      lnPole: weightedSum([1 / ((1 - alpha * sampleTime) * Math.exp(values.lnPole)), gAlpha]),
      lnForward,
      lnReverse,
      coulomb: weightedSum([half, gResistF], [half, gResistR]),
      bias: twoWays ? weightedSum([0.5, gResistF], [-0.5, gResistR]) : none,
      delayShift:
        model.delayIndex < 0
          ? none
          : weightedSum([1 / beta, row(5)], [-delayShift / (2 * beta), gF], [-delayShift / (2 * beta), gR]),
    },
  };
}

/** Σ factor·vector. */
export function weightedSum(...terms: [factor: number, vector: Float64Array][]): Float64Array {
  const g = new Float64Array(terms[0]![1].length);
  for (const [factor, vector] of terms) for (let i = 0; i < g.length; i++) g[i]! += factor * vector[i]!;
  return g;
}
