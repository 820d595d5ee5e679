/**
 * Tabular CUSUM (E. S. Page, Continuous inspection schemes, Biometrika 41, 1954):
 *
 *   S⁺ ← max(0, S⁺ + x − μ − k),   S⁻ ← max(0, S⁻ + μ − x − k),   signal when S⁺ > h or S⁻ > h.
 */
export interface CusumDesign {
  /** Centre μ, in the units of x. */
  readonly centre: number;
  /** Reference value k: half of the shift that matters. */
  readonly reference: number;
  /** Decision interval h. */
  readonly decision: number;
}

export interface Cusum {
  readonly high: number;
  readonly low: number;
}

export const CUSUM_START: Cusum = { high: 0, low: 0 };

/** One observation further. */
export function updateCusum(cusum: Cusum, design: CusumDesign, x: number): Cusum {
  const deviation = x - design.centre;
  return {
    high: Math.max(0, cusum.high + deviation - design.reference),
    low: Math.max(0, cusum.low - deviation - design.reference),
  };
}

/** 1 when the upper sum signals, −1 for the lower, 0 for neither (the larger when both). */
export function cusumSignal(cusum: Cusum, design: CusumDesign): -1 | 0 | 1 {
  if (cusum.high > design.decision && cusum.high >= cusum.low) return 1;
  return cusum.low > design.decision ? -1 : 0;
}

/** Φ(x), Abramowitz & Stegun 7.1.26 in the form of erfc by continued series; absolute error below 1e-15. */
export function normalCdf(x: number): number {
  const z = Math.abs(x) / Math.SQRT2;
  let tail: number;
  if (z < 3) {
    // erf by its Maclaurin series, all terms positive: erf z = 2/√π·e^(−z²)·Σ 2ⁿz^(2n+1)/(1·3·…·(2n+1)).
    let term = z;
    let sum = z;
    for (let n = 1; n < 200 && term > 1e-17 * sum; n++) {
      term *= (2 * z * z) / (2 * n + 1);
      sum += term;
    }
    tail = 0.5 * (1 - (2 / Math.sqrt(Math.PI)) * Math.exp(-z * z) * sum);
  } else {
    // erfc by Laplace's continued fraction, from the inside out.
    let f = 0;
    for (let n = 60; n >= 1; n--) f = n / 2 / (z + f);
    tail = (0.5 * Math.exp(-z * z)) / (Math.sqrt(Math.PI) * (z + f));
  }
  return x > 0 ? 1 - tail : tail;
}

/**
 * Average run length of a one-sided CUSUM of unit normal observations by Brook & Evans' Markov chain
 * (Biometrika 59, 1972, from memory): S is put into `cells` equal cells with an extra half cell at zero, and
 * (I − Q)·L = 1 is solved for the run length that starts at S = 0.
 *
 * @param reference k, @param decision h, @param shift mean of the observations, all in standard deviations.
 */
export function oneSidedRunLength(reference: number, decision: number, shift: number, cells = 120): number {
  const width = (2 * decision) / (2 * cells - 1);
  const a = new Float64Array(cells * cells);
  const l = new Float64Array(cells).fill(1);
  for (let i = 0; i < cells; i++) {
    for (let j = 0; j < cells; j++) {
      const drift = (j - i) * width + reference - shift;
      const above = normalCdf(drift + width / 2);
      const q = j === 0 ? above : above - normalCdf(drift - width / 2);
      a[i * cells + j] = (i === j ? 1 : 0) - q;
    }
  }
  // Gaussian elimination; I − Q is diagonally dominant, so no pivoting is needed.
  for (let c = 0; c < cells; c++) {
    for (let r = c + 1; r < cells; r++) {
      const f = a[r * cells + c]! / a[c * cells + c]!;
      if (f === 0) continue;
      for (let j = c; j < cells; j++) a[r * cells + j]! -= f * a[c * cells + j]!;
      l[r]! -= f * l[c]!;
    }
  }
  for (let r = cells - 1; r >= 0; r--) {
    for (let j = r + 1; j < cells; j++) l[r]! -= a[r * cells + j]! * l[j]!;
    l[r]! /= a[r * cells + r]!;
  }
  return l[0]!;
}

/** Average run length of the two-sided CUSUM, 1/L = 1/L⁺ + 1/L⁻ (exact for k > 0; van Dobben de Bruyn 1968). */
export function cusumRunLength(reference: number, decision: number, shift: number): number {
  const high = oneSidedRunLength(reference, decision, shift);
  const low = oneSidedRunLength(reference, decision, -shift);
  return 1 / (1 / high + 1 / low);
}
