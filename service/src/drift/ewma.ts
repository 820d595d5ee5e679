/**
 * Exponentially weighted moving average chart (S. W. Roberts, Technometrics 1, 1959):
 *
 *   z ← λx + (1 − λ)z,   limits μ ± L·σ·√(λ/(2 − λ)·(1 − (1 − λ)^(2n))).
 */
export interface EwmaDesign {
  readonly centre: number;
  /** Standard deviation of one observation. */
  readonly sigma: number;
  /** Weight λ of the newest observation, 0 < λ ≤ 1. */
  readonly weight: number;
  /** Width L of the limits in standard deviations of z. */
  readonly width: number;
}

/** One observation further. */
export function updateEwma(z: number, weight: number, x: number): number {
  return weight * x + (1 - weight) * z;
}

/** Distance of the limits from the centre after n observations; the lasting one when n is not given. */
export function ewmaHalfWidth(design: EwmaDesign, n = Infinity): number {
  const { weight, sigma, width } = design;
  const settled = weight / (2 - weight);
  const share = Number.isFinite(n) ? 1 - (1 - weight) ** (2 * n) : 1;
  return width * sigma * Math.sqrt(settled * share);
}

/** 1 above the upper limit, −1 below the lower, 0 between. */
export function ewmaSignal(z: number, design: EwmaDesign, n = Infinity): -1 | 0 | 1 {
  const half = ewmaHalfWidth(design, n);
  if (z > design.centre + half) return 1;
  return z < design.centre - half ? -1 : 0;
}
