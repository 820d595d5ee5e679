/** Weights of three neighbouring outputs in the hold's mean, and their derivatives by the dead time. */
export interface HoldTaps {
  /** Newest first; they add up to 1. */
  readonly weights: readonly [number, number, number];
  /** ∂weights/∂τ, 1/s; they add up to 0. */
  readonly slopes: readonly [number, number, number];
}

/**
 * How an output that a zero-order hold keeps over T enters the exact difference equation when it acts φT
 * late, 0 ≤ φ < 1: with g(t) = t − (1 − e^(−αt))/α, the plant's unit step response over K, and a = e^(−αT),
 *
 *   n₁ = g((1−φ)T),  n₂ = g((2−φ)T) − (2+a)·n₁,  n₃ = g((3−φ)T) − (2+a)·g((2−φ)T) + (1+2a)·n₁,
 *
 * the coefficients of (1−z⁻¹)²(1−az⁻¹)·Σ g((i−φ)T)z⁻ⁱ, divided by their sum T(1−a).
 *
 * @param pole α, rad/s. @param sampleTime T, s. @param late φ.
 */
export function holdTaps(pole: number, sampleTime: number, late: number): HoldTaps {
  // Below αT = 1e-3 the weights no longer depend on α to 1e-4 and the difference of exponentials loses digits.
  const alpha = Math.max(pole, 1e-3 / sampleTime);
  const a = Math.exp(-alpha * sampleTime);
  const sum = sampleTime * (1 - a);
  const [t1, t2, t3] = [(1 - late) * sampleTime, (2 - late) * sampleTime, (3 - late) * sampleTime];
  return {
    weights: combine(response(alpha, t1), response(alpha, t2), response(alpha, t3), a, sum),
    slopes: combine(slope(alpha, t1), slope(alpha, t2), slope(alpha, t3), a, sum),
  };
}

const response = (alpha: number, t: number): number => t + Math.expm1(-alpha * t) / alpha;
const slope = (alpha: number, t: number): number => Math.expm1(-alpha * t);
const combine = (f1: number, f2: number, f3: number, a: number, sum: number): [number, number, number] => [
  f1 / sum,
  (f2 - (2 + a) * f1) / sum,
  (f3 - (2 + a) * f2 + (1 + 2 * a) * f1) / sum,
];
