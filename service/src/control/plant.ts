/**
 * The plant of a position-controlled axis and its exact discretisation.
 *
 * Units throughout `control/`: position mm, time s, output u in % of full scale, gain K in (mm/s)/%,
 * pole α in rad/s, dead time s, Coulomb friction f and bias b in % of output.
 */

/**
 * G(s) = Kα / (s(s+α)) · e^(−τs), with v' = −αv + Kα(u(t−τ) − f·sgn(v) − b).
 *
 * From Newton's M v' = g·u − B·v − F·sgn(v) − o: K = g/B, α = B/M, f = F/g, b = o/g.
 */
export interface Plant {
  /** K, (mm/s)/%. */
  gain: number;
  /** α, rad/s. */
  pole: number;
  /** τ, s; 0 when absent. */
  deadTime?: number;
  /** f, % of output; 0 when absent. */
  coulomb?: number;
  /** b, % of output; 0 when absent. */
  bias?: number;
}

/** Physical input that the formulas cannot take; `path` names the field. */
export class UnphysicalInputError extends Error {
  constructor(
    readonly path: string,
    readonly reason: string,
  ) {
    super(`${path} ${reason}`);
    this.name = 'UnphysicalInputError';
  }
}

/** Refuses a number that is not finite or not greater than zero, naming the field. */
export function requirePositive(path: string, value: number): void {
  if (!Number.isFinite(value) || value <= 0)
    throw new UnphysicalInputError(path, 'must be a finite number greater than 0');
}

/** Refuses a number that is not finite or is negative, naming the field. */
export function requireNotNegative(path: string, value: number): void {
  if (!Number.isFinite(value) || value < 0)
    throw new UnphysicalInputError(path, 'must be a finite number, 0 or greater');
}

/** Refuses a number that is not finite, naming the field. */
export function requireFinite(path: string, value: number): void {
  if (!Number.isFinite(value)) throw new UnphysicalInputError(path, 'must be a finite number');
}

/** Throws `UnphysicalInputError` for a plant that no axis can have. */
export function checkPlant(plant: Plant): void {
  requirePositive('plant.gain', plant.gain);
  requirePositive('plant.pole', plant.pole);
  requireNotNegative('plant.deadTime', plant.deadTime ?? 0);
  requireNotNegative('plant.coulomb', plant.coulomb ?? 0);
  requireFinite('plant.bias', plant.bias ?? 0);
}

/**
 * 1 − (1 − e^(−x))/x = Σ (−1)^(k+1) x^k/(k+1)!, k ≥ 1: the share of a held velocity step that position
 * makes within one hold. The series is used for small x, where the closed form loses every digit.
 */
export function heldPositionShare(x: number): number {
  if (x > 0.5) return 1 + Math.expm1(-x) / x;
  let term = x / 2;
  let sum = term;
  for (let k = 2; Math.abs(term) > 1e-18 * sum; k++) {
    term *= -x / (k + 1);
    sum += term;
  }
  return sum;
}

/** Zero-order-hold equivalent of the plant without dead time, friction and bias. */
export interface HeldPlant {
  /** a = e^(−αT). */
  decay: number;
  /** (1 − a)/α, s: position gained from the old velocity. */
  positionFromVelocity: number;
  /** K(T − (1 − a)/α), mm/%: position gained from the held output. */
  positionFromOutput: number;
  /** K(1 − a), (mm/s)/%: velocity gained from the held output. */
  velocityFromOutput: number;
}

/**
 * Exact zero-order hold over T seconds (Åström & Wittenmark, Computer-Controlled Systems):
 *
 *     y⁺ = y + (1−a)/α · v + K(T − (1−a)/α) u
 *     v⁺ = a v + K(1−a) u,      a = e^(−αT)
 *
 * with the output u in %, y in mm, v in mm/s.
 */
export function zeroOrderHold(plant: Pick<Plant, 'gain' | 'pole'>, duration: number): HeldPlant {
  const x = plant.pole * duration;
  const rise = -Math.expm1(-x);
  return {
    decay: Math.exp(-x),
    positionFromVelocity: rise / plant.pole,
    positionFromOutput: plant.gain * duration * heldPositionShare(x),
    velocityFromOutput: plant.gain * rise,
  };
}

/**
 * Difference equation of the position increments at the sample time:
 * Δy(k) = a Δy(k−1) + b₁ u(k−1) + b₂ u(k−2), b₁ = K(T − (1−a)/α), b₂ = K((1−a)/α − aT).
 */
export function incrementEquation(
  plant: Pick<Plant, 'gain' | 'pole'>,
  sampleTime: number,
): { a: number; b1: number; b2: number } {
  const x = plant.pole * sampleTime;
  const held = zeroOrderHold(plant, sampleTime);
  // (1−e^−x)/x − e^−x, rearranged so that nothing cancels for small x
  const tail = -Math.expm1(-x) - heldPositionShare(x);
  return { a: held.decay, b1: held.positionFromOutput, b2: plant.gain * sampleTime * tail };
}

/**
 * K and α from an increment equation, the inverse of `incrementEquation`:
 * α = −ln(a)/T, K = (b₁ + b₂)/(T(1 − a)). Null when 0 < a < 1 does not hold.
 */
export function plantFromIncrements(
  equation: { a: number; b1: number; b2: number },
  sampleTime: number,
): { gain: number; pole: number } | null {
  const { a, b1, b2 } = equation;
  if (!(a > 0 && a < 1)) return null;
  return { gain: (b1 + b2) / (sampleTime * (1 - a)), pole: -Math.log(a) / sampleTime };
}

/** A dead time τ in samples: τ = (whole + fraction)·T with 0 ≤ fraction < 1. */
export function deadTimeInSamples(deadTime: number, sampleTime: number): { whole: number; fraction: number } {
  const samples = deadTime / sampleTime;
  const nearest = Math.round(samples);
  // a dead time given as a decimal multiple of the sample time is a whole number of samples
  if (Math.abs(samples - nearest) < 1e-9 * Math.max(1, samples)) return { whole: nearest, fraction: 0 };
  const whole = Math.floor(samples);
  return { whole, fraction: samples - whole };
}
