import { quadraticForm } from './symmetric.js';
import type { BlockFit } from './motion-regression.js';
import type { PlantFigures, PlantValues } from './plant-figures.js';
import type { Interval, LnCovariance, PlantEstimate, PlantPrior, Verdict } from './plant-estimate.js';

/** A pooled fit with what it was made from. */
export interface PooledFit {
  readonly fit: BlockFit;
  readonly figures: PlantFigures;
  readonly movingSeconds: number;
  /** Share of the moving time with the output at its limit, 0 … 1. */
  readonly atLimitShare: number;
  /** Share of the moving time spent forward, 0 … 1. */
  readonly forwardShare: number;
  /** NaN while nothing has been simulated with this plant. */
  readonly fitPct: number;
  readonly method: MethodVariance;
}

/** Two-sided 95 % quantile of Student's t, by the first terms of its expansion (Abramowitz & Stegun 26.7.5). */
export function student95(degrees: number): number {
  const z = 1.959964;
  const n = Math.max(degrees, 2);
  const z3 = z * z * z;
  const z5 = z3 * z * z;
  return z + (z3 + z) / (4 * n) + (5 * z5 + 16 * z3 + 3 * z) / (96 * n * n);
}

/** gᵀ·cov(θ)·h. */
export function covarianceOf(fit: BlockFit, g: Float64Array, h: Float64Array): number {
  return quadraticForm(g, fit.covariance, h, fit.model.parameters);
}

/** Variance that a method leaves beside the residuals': of ln K, of ln α, and of f and b in % of output. */
export interface MethodVariance {
  readonly lnGain: number;
  readonly lnPole: number;
  readonly friction: number;
}

/** Covariance of (ln K, ln α). */
export function lnCovariance(fit: BlockFit, figures: PlantFigures, method: MethodVariance): LnCovariance {
  const { lnGain, lnPole } = figures.gradients;
  return {
    gain: covarianceOf(fit, lnGain, lnGain) + method.lnGain,
    cross: covarianceOf(fit, lnGain, lnPole),
    pole: covarianceOf(fit, lnPole, lnPole) + method.lnPole,
  };
}

/** Difference of ln K⁺ and ln K⁻ that matters, and the standard errors it must exceed. */
const DIRECTIONS = { difference: 0.02, deviations: 4 } as const;

/** Whether K⁺ and K⁻ differ by as much as matters. */
export function directionsMayDiffer({ gainForward, gainReverse }: PlantValues): boolean {
  return Math.abs(Math.log(gainForward / gainReverse)) > DIRECTIONS.difference;
}

/** Whether K⁺ and K⁻ differ by more than 2 % and by more than four standard errors. */
export function directionsDiffer(fit: BlockFit, figures: PlantFigures): boolean {
  if (!directionsMayDiffer(figures)) return false;
  const difference = Math.log(figures.gainForward / figures.gainReverse);
  const g = figures.gradients.lnForward.map((v, i) => v - figures.gradients.lnReverse[i]!);
  return Math.abs(difference) > DIRECTIONS.deviations * Math.sqrt(covarianceOf(fit, g, g));
}

/** What is answered when the data cannot say anything about the plant. */
export function unknownPlant(
  prior: PlantPrior,
  movingSeconds: number,
  deadTime: number,
  remarks: readonly string[],
): PlantEstimate {
  const open = (value: number): Interval => ({ value, low: 0, high: Number.MAX_VALUE });
  return {
    gain: open(prior.gain),
    pole: open(prior.pole),
    coulomb: { value: 0, low: 0, high: 100 },
    bias: { value: 0, low: -100, high: 100 },
    deadTime,
    lnCovariance: { gain: Number.MAX_VALUE, cross: 0, pole: Number.MAX_VALUE },
    fitPct: 0,
    movingSeconds,
    verdict: 'unidentifiable',
    remarks,
  };
}

/** Motion below which nothing is said, and below which it is said with doubt, s. */
export const LEAST_MOTION = 1;
const FAIR_MOTION = 3;

/**
 * From a pooled fit to figures with 95 % intervals, a verdict and remarks.
 *
 * @param unsettled the newest window contradicted the older ones: the plant changed within it or just before
 */
export function describePlant(
  pooled: PooledFit | null,
  prior: PlantPrior,
  deadTime: number,
  movingSeconds: number,
  unsettled = false,
): PlantEstimate {
  if (movingSeconds < LEAST_MOTION) {
    return unknownPlant(prior, movingSeconds, deadTime, [`only ${seconds(movingSeconds)} of motion`]);
  }
  if (!pooled) {
    return unknownPlant(prior, movingSeconds, deadTime, [
      'the moves do not tell gain, pole and friction apart: more than one speed is needed',
    ]);
  }
  const { fit, figures, method } = pooled;
  const { gradients } = figures;
  const t = student95(fit.effectiveBlocks);
  const deviation = (g: Float64Array, beside: number): number =>
    Math.sqrt(Math.max(covarianceOf(fit, g, g), 0) + beside);
  const logInterval = (ln: number, g: Float64Array, beside = method.lnGain): Interval => {
    const half = t * deviation(g, beside);
    return { value: Math.exp(ln), low: Math.exp(ln - half), high: Math.exp(ln + half) };
  };
  const plainInterval = (value: number, g: Float64Array): Interval => {
    const half = t * deviation(g, method.friction);
    return { value, low: value - half, high: value + half };
  };
  const gain = logInterval(figures.lnGain, gradients.lnGain);
  const pole = logInterval(figures.lnPole, gradients.lnPole, method.lnPole);
  let coulomb = plainInterval(figures.coulomb, gradients.coulomb);
  let bias = plainInterval(figures.bias, gradients.bias);

  const remarks: string[] = [];
  let verdict: Verdict = 'usable';
  const doubt = (text: string): void => {
    remarks.push(text);
    verdict = 'doubtful';
  };
  if (unsettled) doubt('the plant has just changed: not settled yet');
  if (movingSeconds < FAIR_MOTION) doubt(`only ${seconds(movingSeconds)} of motion`);
  const half = (i: Interval): number => 50 * Math.log(i.high / i.low);
  if (half(gain) > 10) doubt(`the gain is known to ±${half(gain).toFixed(0)} % only`);
  if (half(pole) > 25) doubt(`the pole is known to ±${half(pole).toFixed(0)} % only`);
  if (pooled.fitPct < 70)
    doubt(`the simulated velocity explains ${Math.max(pooled.fitPct, 0).toFixed(0)} % of the motion`);
  if (!fit.model.forward || !fit.model.reverse) {
    const f = Math.abs(figures.coulomb);
    coulomb = { value: figures.coulomb, low: Math.min(coulomb.low, 0), high: Math.max(2 * f, coulomb.high) };
    bias = { value: 0, low: -Math.max(f, Math.abs(coulomb.high)), high: Math.max(f, Math.abs(coulomb.high)) };
    remarks.push(
      `motion ${fit.model.forward ? 'forward' : 'in reverse'} only: dry friction and offset cannot be told apart`,
    );
  }
  if (fit.model.directional) {
    const ratio = figures.gainForward / figures.gainReverse;
    remarks.push(`K differs by direction: forward is ${ratio.toFixed(2)} times reverse`);
  }
  if (pooled.atLimitShare > 0.05) {
    remarks.push(`output was at its limit ${(100 * pooled.atLimitShare).toFixed(0)} % of the moving time`);
  }
  if (half(gain) > 50 || half(pole) > 70) {
    verdict = 'unidentifiable';
    remarks.push('the moves do not tell gain, pole and friction apart: more than one speed is needed');
  }
  return {
    gain,
    pole,
    ...(fit.model.directional
      ? {
          gainForward: logInterval(Math.log(figures.gainForward), gradients.lnForward),
          gainReverse: logInterval(Math.log(figures.gainReverse), gradients.lnReverse),
        }
      : {}),
    coulomb,
    bias,
    deadTime: Math.max(deadTime, 0),
    lnCovariance: lnCovariance(fit, figures, method),
    fitPct: Number.isFinite(pooled.fitPct) ? pooled.fitPct : 0,
    movingSeconds,
    verdict,
    remarks,
  };
}

function seconds(value: number): string {
  return `${value.toFixed(1)} s`;
}
