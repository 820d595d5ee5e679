import { checkPlant, type Plant } from './plant.js';
import {
  add,
  type Complex,
  derivative,
  evaluate,
  multiply,
  type Polynomial,
  positiveRoots,
  roots,
  squaredMagnitude,
  trim,
} from './polynomial.js';
import { checkGains, type Gains, setPointWeights, type Structure } from './pole-placement.js';

/** A ratio of polynomials in s, coefficients by ascending power, without a common root at 0. */
export interface TransferFunction {
  numerator: Polynomial;
  denominator: Polynomial;
  /** Absolute rounding uncertainty of the denominator's coefficients, for `roots`. */
  denominatorUncertainty: readonly number[];
}

/** Gains below this, far below any drive's, are taken as 0: their powers would leave the range of a double. */
const DUST = 1e-30;

/**
 * Gains as they act: Kd is 0 when KαKd is lost in the rounding of α + KαKd, so that a gain which is zero to
 * rounding does not invent a zero or a phase crossover at 10¹⁷ rad/s.
 */
export function effectiveGains(plant: Plant, gains: Gains): Gains {
  return {
    kp: acting(gains.kp),
    ki: acting(gains.ki),
    kd: Math.abs(plant.gain * gains.kd) <= 4 * Number.EPSILON ? 0 : gains.kd,
    kv: acting(gains.kv),
    ka: acting(gains.ka),
  };
}

function acting(gain: number): number {
  return Math.abs(gain) < DUST ? 0 : gain;
}

/** x, or 0 when x is only the rounding left over from terms of the given total size. */
function unlessRounding(x: number, size: number): number {
  return Math.abs(x) <= 4 * Number.EPSILON * size ? 0 : x;
}

/**
 * Δ(s) = s³ + (α + KαKd)s² + KαKp s + KαKi with the rounding uncertainty of its coefficients; without the
 * integrator (Ki = 0) the root at 0 that nothing drives is divided out: Δ(s) = s² + (α + KαKd)s + KαKp.
 */
export function characteristicPolynomial(
  plant: Plant,
  gains: Gains,
): { coefficients: number[]; uncertainty: number[] } {
  const b = plant.gain * plant.pole;
  const { kp, ki, kd } = effectiveGains(plant, gains);
  const damping = b * kd;
  const coefficients = [b * ki, b * kp, plant.pole + damping, 1];
  const eps = 4 * Number.EPSILON;
  const uncertainty = [
    eps * Math.abs(coefficients[0]!),
    eps * Math.abs(coefficients[1]!),
    eps * (plant.pole + Math.abs(damping)),
    0,
  ];
  const from = ki === 0 ? 1 : 0;
  return { coefficients: coefficients.slice(from), uncertainty: uncertainty.slice(from) };
}

/**
 * L(s) = C(s)G(s) = Kα(Kd s² + Kp s + Ki) / (s²(s + α)), the loop broken at the plant input; one s less above
 * and below when Ki = 0. The same for all structures; delays are left out.
 */
export function openLoop(plant: Plant, gains: Gains): { numerator: number[]; denominator: number[] } {
  const b = plant.gain * plant.pole;
  const { kp, ki, kd } = effectiveGains(plant, gains);
  const from = ki === 0 ? 1 : 0;
  return {
    numerator: [b * ki, b * kp, b * kd].slice(from),
    denominator: [0, 0, plant.pole, 1].slice(from),
  };
}

/**
 * From target to position:
 * T(s) = Kα(Ka s³ + (γKd + Kv)s² + βKp s + Ki)/Δ(s). With full feed-forward and β = γ = 1, T = 1.
 * With Ki = 0 one s is divided out above and below.
 */
export function referenceTransfer(plant: Plant, gains: Gains, structure: Structure): TransferFunction {
  const { beta, gamma } = setPointWeights(structure);
  const b = plant.gain * plant.pole;
  const { kp, ki, kd, kv, ka } = effectiveGains(plant, gains);
  const square = unlessRounding(gamma * kd + kv, gamma * Math.abs(kd) + Math.abs(kv));
  const from = ki === 0 ? 1 : 0;
  const numerator = trim([b * ki, b * beta * kp, b * square, b * ka].slice(from));
  const { coefficients: denominator, uncertainty } = characteristicPolynomial(plant, gains);
  return { numerator, denominator, denominatorUncertainty: uncertainty };
}

/** The last loop asked for: one design asks for its poles three times. */
let lastPoles: { coefficients: Polynomial; uncertainty: Polynomial; poles: readonly Complex[] } | null = null;

/** Poles of the closed loop: the roots of Δ(s), rad/s. A triple pole comes back as three equal reals. */
export function closedLoopPoles(plant: Plant, gains: Gains): readonly Complex[] {
  const { coefficients, uncertainty } = characteristicPolynomial(plant, gains);
  const equal = (a: Polynomial, b: Polynomial): boolean =>
    a.length === b.length && a.every((c, i) => c === b[i]);
  if (
    !lastPoles ||
    !equal(lastPoles.coefficients, coefficients) ||
    !equal(lastPoles.uncertainty, uncertainty)
  )
    lastPoles = { coefficients, uncertainty, poles: roots(coefficients, uncertainty) };
  return lastPoles.poles;
}

/** Whether Δ(s) has all its roots in the open left half plane (Routh): all dᵢ > 0 and d₂d₁ > d₀. */
export function isStable(plant: Plant, gains: Gains): boolean {
  const { coefficients } = characteristicPolynomial(plant, gains);
  if (!coefficients.every((d) => d > 0)) return false;
  const [d0 = 0, d1 = 0, d2 = 0] = coefficients;
  return coefficients.length === 3 || d2 * d1 - d0 > 4 * Number.EPSILON * d0;
}

export interface ClosedLoop {
  /** Roots of Δ(s), rad/s. */
  poles: readonly Complex[];
  /** Roots of T's numerator, rad/s. */
  zeros: Complex[];
  /** First frequency where |T| falls to −3 dB (10^(−3/20)) of its value at rest, Hz; null when it never does. */
  bandwidthHz: number | null;
  /** Largest |T|, dB; null when the loop is not stable or T is zero. */
  peakDb: number | null;
  /** Where, Hz: 0 when |T| is largest at rest, null when it is only approached at infinite frequency. */
  peakHz: number | null;
}

/**
 * Poles, zeros, bandwidth and resonance peak of the closed loop, from the exact polynomials in ω²: the
 * bandwidth is a root of |num|²·|T(0)|⁻² − 10^(−0.3)·|den|², the peak a root of the derivative of |T|².
 *
 * @throws UnphysicalInputError naming the field
 */
export function closedLoop(plant: Plant, gains: Gains, structure: Structure): ClosedLoop {
  checkPlant(plant);
  checkGains(gains);
  const poles = closedLoopPoles(plant, gains);
  const transfer = referenceTransfer(plant, gains, structure);
  if (transfer.numerator.every((c) => c === 0))
    return { poles, zeros: [], bandwidthHz: null, peakDb: null, peakHz: null };
  const zeros = roots(transfer.numerator);
  const above = squaredMagnitude(transfer.numerator);
  const below = squaredMagnitude(transfer.denominator);
  const bandwidthHz = fallsTo(above, below, 10 ** -0.3);
  if (!isStable(plant, gains)) return { poles, zeros, bandwidthHz, peakDb: null, peakHz: null };
  const peak = supremum(above, below);
  // on the edge of stability the denominator vanishes at the resonance to rounding
  if (!Number.isFinite(peak.value)) return { poles, zeros, bandwidthHz, peakDb: null, peakHz: null };
  return {
    poles,
    zeros,
    bandwidthHz,
    peakDb: 10 * Math.log10(peak.value),
    peakHz: peak.at === null ? null : Math.sqrt(peak.at) / (2 * Math.PI),
  };
}

/** First frequency, Hz, where above/below (polynomials in ω²) falls to `share` of its value at 0. */
function fallsTo(above: Polynomial, below: Polynomial, share: number): number | null {
  const atRest = above[0]! / below[0]!;
  if (!Number.isFinite(atRest) || atRest === 0) return null;
  const difference = add(above, below, -share * atRest);
  for (const x of positiveRoots(difference))
    if (evaluate(derivative(difference), x) < 0) return Math.sqrt(x) / (2 * Math.PI);
  return null;
}

/**
 * Supremum over ω of above/below, polynomials in x = ω²: compared are x = 0, every stationary point (root of
 * above'·below − above·below') and the limit at infinity. `at` is ω², or null when only approached at infinity.
 */
export function supremum(above: Polynomial, below: Polynomial): { value: number; at: number | null } {
  const a = trim(above);
  const b = trim(below);
  let best: { value: number; at: number | null } = { value: a[0]! / b[0]!, at: 0 };
  const stationary = add(multiply(derivative(a), b), multiply(a, derivative(b)), -1);
  // the leading terms cancel when numerator and denominator have the same degree
  if (a.length === b.length) stationary[a.length + b.length - 3] = 0;
  if (stationary.some((c) => c !== 0))
    for (const x of positiveRoots(stationary)) {
      const value = evaluate(a, x) / evaluate(b, x);
      // a relative 1e-12 keeps rounding from naming a peak on a flat response
      if (value > best.value * (1 + 1e-12)) best = { value, at: x };
    }
  if (a.length === b.length) {
    const limit = a[a.length - 1]! / b[b.length - 1]!;
    if (limit > best.value * (1 + 1e-12)) best = { value: limit, at: null };
  }
  return best;
}

/**
 * Steady-state errors r − y of the closed loop, from (1 − T)/s^k at s → 0:
 *
 * - ramp r = t: Kp(1 − β)/Ki (I-PD 3/λ for a triple pole), else 0
 * - acceleration r = t²/2: (α + KαKd(1 − γ) − KαKv)/(KαKi)
 *   (PID α/λ³, PI-D 3/λ², 0 with the full feed-forward), unbounded where the ramp error is not 0
 *
 * With Ki = 0 the ramp error is (α + KαKd(1 − γ) − KαKv)/(KαKp) and the acceleration error follows if that is
 * 0. Null where the error grows without bound or the loop is not stable.
 */
export function steadyErrors(
  plant: Plant,
  gains: Gains,
  structure: Structure,
): { ramp: number | null; acceleration: number | null } {
  checkPlant(plant);
  checkGains(gains);
  const none = { ramp: null, acceleration: null };
  const { beta, gamma } = setPointWeights(structure);
  const b = plant.gain * plant.pole;
  const { kp, ki, kd, kv, ka } = effectiveGains(plant, gains);
  const held = b * kd * (1 - gamma);
  const lag = unlessRounding(plant.pole + held - b * kv, plant.pole + Math.abs(held) + Math.abs(b * kv));
  if (ki !== 0) {
    if (!isStable(plant, gains)) return none;
    const ramp = ((1 - beta) * kp) / ki;
    return { ramp, acceleration: ramp === 0 ? lag / (b * ki) : null };
  }
  if (!isStable(plant, gains) || beta === 0) return none;
  const ramp = lag / (b * kp);
  const rest = unlessRounding(1 - b * ka, 1 + Math.abs(b * ka));
  return { ramp, acceleration: ramp === 0 ? rest / (b * kp) : null };
}
