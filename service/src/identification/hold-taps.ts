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
  const response = (t: number): number => t + Math.expm1(-alpha * t) / alpha;
  const slope = (t: number): number => Math.expm1(-alpha * t);
  const sum = sampleTime * (1 - a);
  const combine = (f: (t: number) => number): [number, number, number] => {
    const [f1, f2, f3] = [1, 2, 3].map((i) => f((i - late) * sampleTime)) as [number, number, number];
    return [f1 / sum, (f2 - (2 + a) * f1) / sum, (f3 - (2 + a) * f2 + (1 + 2 * a) * f1) / sum];
  };
  return { weights: combine(response), slopes: combine(slope) };
}
