import {
  characteristicPolynomial,
  effectiveGains,
  isStable,
  openLoop,
  referenceTransfer,
  supremum,
} from './loop.js';
import { checkPlant, type Plant, UnphysicalInputError } from './plant.js';
import { add, divide, evaluateComplex, positiveRoots, squaredMagnitude } from './polynomial.js';
import { checkGains, type Gains, type Structure } from './pole-placement.js';

const DEGREES = 180 / Math.PI;

export interface GainCrossover {
  /** Where |L| = 1, Hz. */
  frequencyHz: number;
  /** 180° + arg L, with arg L continuous from −180° at rest. */
  phaseMarginDeg: number;
  /** Smallest pure delay that puts L on −1 here, s. */
  delayMargin: number;
}

export interface Margins {
  gainCrossovers: GainCrossover[];
  /** By how much all gains may rise, dB; null when without limit. */
  gainMarginHighDb: number | null;
  /** By how much all gains may fall, dB (negative); null when without limit. */
  gainMarginLowDb: number | null;
  /** Smallest over all gain crossovers, degrees. */
  phaseMarginDeg: number | null;
  gainCrossoverHz: number | null;
  phaseCrossoverHz: number | null;
  /** Ms = sup |1/(1 + L)|, 1 when only approached at infinite frequency. */
  maxSensitivity: number | null;
  /** Where |1/(1 + L)| is largest, Hz; null when only approached at infinite frequency. */
  maxSensitivityHz: number | null;
  /** Smallest pure delay that makes the loop unstable, s. */
  delayMargin: number | null;
}

/**
 * arg L(jω) in degrees, continuous from −180° at rest:
 * −180° + arg(Ki − Kdω² + jKpω) − atan(ω/α).
 */
export function openLoopPhaseDeg(plant: Plant, gains: Gains, omega: number): number {
  const { kp, ki, kd } = effectiveGains(plant, gains);
  const lead = Math.atan2(kp * omega, ki - kd * omega * omega);
  return -180 + (lead - Math.atan(omega / plant.pole)) * DEGREES;
}

/**
 * Stability margins of the continuous loop without delays, each from the exact expressions:
 *
 * - gain crossovers: positive roots x = ω² of x²(x + α²) = (Kα)²[(Ki − Kd x)² + Kp² x]; all of them
 * - phase crossover: L(jω) is real where Kd ω² = Ki − αKp. It exists only when that gives a positive ω²; a
 *   phase that merely approaches −180° at 0 or ∞ is no crossover
 * - gain margins: the factor 1/|L| at the phase crossover, upper when above 1, lower when below. A lower margin
 *   is a limit for falling gains, not an instability
 * - delay margin: phase margin (in [0, 360°)) over ω, the smallest of all gain crossovers
 * - Ms: the largest of |s²(s + α)/Δ(s)| over the roots of its derivative in ω² and its limit 1
 *
 * For a loop that is not stable gain margins, delay margin and Ms are null: there is nothing left to lose.
 *
 * @throws UnphysicalInputError naming the field
 */
export function margins(plant: Plant, gains: Gains): Margins {
  checkPlant(plant);
  checkGains(gains);
  const { numerator, denominator } = openLoop(plant, gains);
  const stable = isStable(plant, gains);
  const above = squaredMagnitude(numerator);
  const below = squaredMagnitude(denominator);
  const gainCrossovers = positiveRoots(add(below, above, -1)).map((x): GainCrossover => {
    const omega = Math.sqrt(x);
    const phaseMarginDeg = 180 + openLoopPhaseDeg(plant, gains, omega);
    const turn = ((phaseMarginDeg % 360) + 360) % 360;
    return { frequencyHz: omega / (2 * Math.PI), phaseMarginDeg, delayMargin: turn / DEGREES / omega };
  });
  const tightest = gainCrossovers.reduce<GainCrossover | null>(
    (least, c) => (least === null || c.phaseMarginDeg < least.phaseMarginDeg ? c : least),
    null,
  );
  const crossing = phaseCrossover(plant, gains);
  const marginDb = crossing === null ? null : -20 * Math.log10(crossing.magnitude);
  const delta = characteristicPolynomial(plant, gains).coefficients;
  const supremal = stable ? supremum(below, squaredMagnitude(delta)) : null;
  // on the edge of stability Δ vanishes at the resonance to rounding
  const peak = supremal !== null && Number.isFinite(supremal.value) ? supremal : null;
  return {
    gainCrossovers,
    gainMarginHighDb: stable && marginDb !== null && marginDb > 0 ? marginDb : null,
    gainMarginLowDb: stable && marginDb !== null && marginDb < 0 ? marginDb : null,
    phaseMarginDeg: tightest?.phaseMarginDeg ?? null,
    gainCrossoverHz: tightest?.frequencyHz ?? null,
    phaseCrossoverHz: crossing === null ? null : crossing.omega / (2 * Math.PI),
    maxSensitivity: peak === null ? null : Math.sqrt(peak.value),
    maxSensitivityHz: peak === null || peak.at === null ? null : Math.sqrt(peak.at) / (2 * Math.PI),
    delayMargin:
      stable && gainCrossovers.length > 0 ? Math.min(...gainCrossovers.map((c) => c.delayMargin)) : null,
  };
}

/** Where L(jω) crosses the negative real axis, rad/s, and |L| there; null when it never does. */
function phaseCrossover(plant: Plant, gains: Gains): { omega: number; magnitude: number } | null {
  const { kp, ki, kd } = effectiveGains(plant, gains);
  const excess = ki - plant.pole * kp;
  const size = Math.abs(ki) + Math.abs(plant.pole * kp);
  // equal to rounding: the phase meets −180° only in the limit ω → 0
  if (kd === 0 || Math.abs(excess) <= 8 * Number.EPSILON * size) return null;
  const square = excess / kd;
  if (square <= 0) return null;
  // there Ki − Kdω² + jKpω = Kp(α + jω), so L(jω) = −KαKp/ω²
  const magnitude = (plant.gain * plant.pole * kp) / square;
  return magnitude > 0 ? { omega: Math.sqrt(square), magnitude } : null;
}

export interface FrequencyResponse {
  frequencyHz: number[];
  /** L(jω): phase continuous from −180° at rest. */
  openLoop: { magnitudeDb: number[]; phaseDeg: number[] };
  /** T(jω): principal phase in (−180°, 180°]. */
  closedLoop: { magnitudeDb: number[]; phaseDeg: number[] };
}

/**
 * Open- and closed-loop frequency response of the continuous loop without delays at the given frequencies
 * (Hz, > 0), each point from the exact transfer function, so that no figure depends on the grid.
 *
 * @throws UnphysicalInputError naming the field
 */
export function frequencyResponse(
  plant: Plant,
  gains: Gains,
  structure: Structure,
  frequenciesHz: readonly number[],
): FrequencyResponse {
  checkPlant(plant);
  checkGains(gains);
  const loop = openLoop(plant, gains);
  const transfer = referenceTransfer(plant, gains, structure);
  const response: FrequencyResponse = {
    frequencyHz: [...frequenciesHz],
    openLoop: { magnitudeDb: [], phaseDeg: [] },
    closedLoop: { magnitudeDb: [], phaseDeg: [] },
  };
  frequenciesHz.forEach((frequency, i) => {
    if (!Number.isFinite(frequency) || frequency <= 0)
      throw new UnphysicalInputError(`frequenciesHz.${i}`, 'must be a finite number greater than 0');
    const omega = 2 * Math.PI * frequency;
    const s = { re: 0, im: omega };
    const l = divide(evaluateComplex(loop.numerator, s), evaluateComplex(loop.denominator, s));
    const t = divide(evaluateComplex(transfer.numerator, s), evaluateComplex(transfer.denominator, s));
    response.openLoop.magnitudeDb.push(decibels(l.re, l.im));
    response.openLoop.phaseDeg.push(openLoopPhaseDeg(plant, gains, omega));
    response.closedLoop.magnitudeDb.push(decibels(t.re, t.im));
    response.closedLoop.phaseDeg.push(Math.atan2(t.im, t.re) * DEGREES);
  });
  return response;
}

/** 10·log₁₀|z|², not below −400 dB, so that a zero on the axis stays a number. */
function decibels(re: number, im: number): number {
  return Math.max(-400, 10 * Math.log10(re * re + im * im));
}
