import { supremum } from './loop.js';
import { type Controller, checkController } from './move.js';
import { checkPlant, type Plant } from './plant.js';
import {
  abs,
  add,
  evaluate,
  evaluateComplex,
  evenAndOdd,
  multiply,
  type Polynomial,
  positiveRoots,
  squaredMagnitude,
} from './polynomial.js';
import { checkGains, type Gains } from './pole-placement.js';
import { sampledOpenLoop } from './sampled-loop.js';

export interface SampledMargins {
  /** Every |L| = 1 below the Nyquist frequency; phase margin in (−180°, 180°]. */
  gainCrossovers: { frequencyHz: number; phaseMarginDeg: number }[];
  phaseMarginDeg: number | null;
  /** Factor by which all gains may rise before a pole reaches the unit circle; null when without limit. */
  gainLimitHigh: number | null;
  /** Factor to which all gains may fall; null when without limit. */
  gainLimitLow: number | null;
  /** Ms = max |1/(1 + L)| over 0 … Nyquist. */
  maxSensitivity: number;
  maxSensitivityHz: number;
}

/**
 * L of the sampled loop on the unit circle as polynomials in s with z = (1 + sT/2)/(1 − sT/2), s = jν and
 * ν = (2/T)·tan(ωT/2): the half plane instead of the disc, so that everything known for continuous loops
 * applies exactly. δ = s/(1 − sT/2).
 */
function bilinearLoop(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  delays: number,
): { numerator: number[]; denominator: number[] } {
  const { numerator, denominator } = sampledOpenLoop(plant, gains, sampleTime, delays);
  const n = denominator.length - 1;
  const mapped = (p: Polynomial): number[] => {
    let result: number[] = [0];
    let edge: number[] = [1];
    for (let i = n; i >= 0; i--) {
      const shifted = [...new Array<number>(i).fill(0), ...edge];
      if ((p[i] ?? 0) !== 0) result = add(result, shifted, p[i]!);
      edge = multiply(edge, [1, -sampleTime / 2]);
    }
    return result;
  };
  return { numerator: mapped(numerator), denominator: mapped(denominator) };
}

/** Largest degree of the open loop for which Ms is a root of a polynomial: four states and six delays. */
const POLYNOMIAL_DEGREE = 10;

/**
 * Ms = max |1/(1 + L)| of the loop as it runs, with the hold, the output delay and the dead time all in it,
 * exact on the unit circle: roots of the derivative of |D|²/|D + N|² in ν², and the Nyquist frequency. With more
 * than a few samples of delay those polynomials lose their digits; then the peak is bracketed on 2000 points of
 * the exact expression and refined by golden section.
 *
 * Meaningful for a stable loop only.
 */
export function sampledMaxSensitivity(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  outputDelaySamples = 0,
): { value: number; frequencyHz: number } {
  const open = sampledOpenLoop(plant, gains, sampleTime, outputDelaySamples);
  if (open.denominator.length - 1 > POLYNOMIAL_DEGREE) return searchedMaxSensitivity(open, sampleTime);
  const loop = bilinearLoop(plant, gains, sampleTime, outputDelaySamples);
  const closed = add(loop.denominator, loop.numerator);
  const peak = supremum(squaredMagnitude(loop.denominator), squaredMagnitude(closed));
  return {
    value: Math.sqrt(peak.value),
    frequencyHz: peak.at === null ? 0.5 / sampleTime : hertz(Math.sqrt(peak.at), sampleTime),
  };
}

function searchedMaxSensitivity(
  open: { numerator: number[]; denominator: number[] },
  sampleTime: number,
): { value: number; frequencyHz: number } {
  const sensitivity = (angle: number): number => {
    // δ = (e^(jθ) − 1)/T without cancellation at small θ
    const half = Math.sin(angle / 2);
    const delta = { re: (-2 * half * half) / sampleTime, im: Math.sin(angle) / sampleTime };
    const below = evaluateComplex(open.denominator, delta);
    const above = evaluateComplex(open.numerator, delta);
    return abs(below) / Math.hypot(below.re + above.re, below.im + above.im);
  };
  const points = 2000;
  const angles = Array.from({ length: points + 1 }, (_, i) => Math.PI * (i / points) ** 3);
  let best = 1;
  for (let i = 2; i <= points; i++) if (sensitivity(angles[i]!) > sensitivity(angles[best]!)) best = i;
  let low = angles[best - 1]!;
  let high = angles[Math.min(points, best + 1)]!;
  const golden = (Math.sqrt(5) - 1) / 2;
  for (let i = 0; i < 60; i++) {
    const a = high - golden * (high - low);
    const b = low + golden * (high - low);
    if (sensitivity(a) > sensitivity(b)) high = b;
    else low = a;
  }
  const angle = (low + high) / 2;
  return { value: sensitivity(angle), frequencyHz: angle / (2 * Math.PI * sampleTime) };
}

/**
 * Margins of the sampled loop with all its delays, each from the exact polynomials in ν²; coefficients that
 * differ by many powers of ten lose nothing, because no z-polynomial is ever multiplied out. For at most six
 * samples of delay (output delay and dead time together).
 *
 * @throws UnphysicalInputError naming the field
 */
export function sampledMargins(plant: Plant, gains: Gains, controller: Controller): SampledMargins {
  checkPlant(plant);
  checkGains(gains);
  checkController(controller);
  const T = controller.sampleTime;
  const delays = controller.outputDelaySamples ?? 0;
  const { numerator, denominator } = bilinearLoop(plant, gains, T, delays);
  const crossings = positiveRoots(add(squaredMagnitude(numerator), squaredMagnitude(denominator), -1));
  const gainCrossovers = crossings.map((x) => {
    const s = { re: 0, im: Math.sqrt(x) };
    const above = evaluateComplex(numerator, s);
    const below = evaluateComplex(denominator, s);
    // −L lies at the phase margin from the positive real axis
    const re = -(above.re * below.re + above.im * below.im);
    const im = -(above.im * below.re - above.re * below.im);
    return { frequencyHz: hertz(s.im, T), phaseMarginDeg: (Math.atan2(im, re) * 180) / Math.PI };
  });
  const factors = gainFactorsAtTheEdge(numerator, denominator);
  const sensitivity = sampledMaxSensitivity(plant, gains, T, delays);
  const above = factors.filter((g) => g > 1);
  const below = factors.filter((g) => g < 1);
  return {
    gainCrossovers,
    phaseMarginDeg: gainCrossovers.length ? Math.min(...gainCrossovers.map((c) => c.phaseMarginDeg)) : null,
    gainLimitHigh: above.length ? Math.min(...above) : null,
    gainLimitLow: below.length ? Math.max(...below) : null,
    maxSensitivity: sensitivity.value,
    maxSensitivityHz: sensitivity.frequencyHz,
  };
}

/** All g > 0 with 1 + gL = 0 somewhere on the unit circle: −1/L where L is real and negative. */
function gainFactorsAtTheEdge(numerator: Polynomial, denominator: Polynomial): number[] {
  const n = evenAndOdd(numerator);
  const d = evenAndOdd(denominator);
  const imaginary = add(multiply(n.odd, d.even), multiply(n.even, d.odd), -1);
  const real = add(multiply(n.even, d.even), [0, ...multiply(n.odd, d.odd)]);
  const size = squaredMagnitude(denominator);
  const factors = positiveRoots(imaginary).map((x) => -evaluate(size, x) / evaluate(real, x));
  const top = Math.max(numerator.length, denominator.length) - 1;
  const atNyquist = (numerator[top] ?? 0) / (denominator[top] ?? 0);
  if (atNyquist < 0) factors.push(-1 / atNyquist);
  return factors.filter((g) => g > 0 && Number.isFinite(g));
}

/** Frequency in Hz of a point ν on the s-axis: ω = (2/T)·atan(νT/2). */
function hertz(nu: number, sampleTime: number): number {
  return Math.atan((nu * sampleTime) / 2) / (Math.PI * sampleTime);
}
