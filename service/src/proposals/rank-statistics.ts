import type { Interval } from '../identification/plant-estimate.js';

/**
 * Wilcoxon–Mann–Whitney: U = Σ ranks of b − n_b(n_b + 1)/2 is about normal with mean n_a·n_b/2 and, with ties of
 * sizes t, variance n_a·n_b/12 · (n + 1 − Σ(t³ − t)/(n(n − 1))).
 *
 * @returns one-sided p values: `pGreater` small when b tends to be greater than a, `pLess` when smaller; both 1 when
 * every value is the same
 */
export function rankTest(a: readonly number[], b: readonly number[]): { pGreater: number; pLess: number } {
  const all = [...a.map((value) => ({ value, b: false })), ...b.map((value) => ({ value, b: true }))].sort(
    (x, y) => x.value - y.value,
  );
  const n = all.length;
  let rankSum = 0;
  let ties = 0;
  for (let i = 0; i < n;) {
    let j = i;
    while (j < n && all[j]!.value === all[i]!.value) j++;
    const rank = (i + 1 + j) / 2;
    for (let k = i; k < j; k++) if (all[k]!.b) rankSum += rank;
    ties += (j - i) ** 3 - (j - i);
    i = j;
  }
  const u = rankSum - (b.length * (b.length + 1)) / 2;
  const variance = ((a.length * b.length) / 12) * (n + 1 - ties / (n * (n - 1)));
  if (!(variance > 0)) return { pGreater: 1, pLess: 1 };
  const off = u - (a.length * b.length) / 2;
  const tail = (z: number): number => 1 - normal(z);
  return {
    pGreater: tail((off - 0.5) / Math.sqrt(variance)),
    pLess: tail((-off - 0.5) / Math.sqrt(variance)),
  };
}

/**
 * By how much b lies above a: the median of all n_a·n_b differences with its 95 % interval from their order
 * statistics, those at n_a·n_b/2 ∓ 1.96·√(n_a·n_b·(n_a + n_b + 1)/12) (J. L. Hodges & E. L. Lehmann 1963; the
 * approximation as in M. Hollander & D. A. Wolfe, Nonparametric Statistical Methods, from memory).
 */
export function shiftBetween(a: readonly number[], b: readonly number[]): Interval {
  const differences = Float64Array.from(a.flatMap((before) => b.map((after) => after - before))).sort();
  const pairs = differences.length;
  const reach = 1.959964 * Math.sqrt((pairs * (a.length + b.length + 1)) / 12);
  const rank = Math.min(Math.max(Math.round(pairs / 2 - reach), 1), Math.ceil(pairs / 2));
  return {
    value: median([...differences]),
    low: differences[rank - 1]!,
    high: differences[pairs - rank]!,
  };
}

export function median(values: readonly number[]): number {
  if (values.length === 0) return NaN;
  const sorted = [...values].sort((a, b) => a - b);
  const middle = sorted.length >> 1;
  return sorted.length % 2 === 1 ? sorted[middle]! : (sorted[middle - 1]! + sorted[middle]!) / 2;
}

/** Standard normal distribution function, Abramowitz & Stegun 26.2.17 (error below 7.5e-8). */
function normal(z: number): number {
  if (z < 0) return 1 - normal(-z);
  const t = 1 / (1 + 0.2316419 * z);
  const polynomial =
    t * (0.31938153 + t * (-0.356563782 + t * (1.781477937 + t * (-1.821255978 + t * 1.330274429))));
  return 1 - (Math.exp((-z * z) / 2) / Math.sqrt(2 * Math.PI)) * polynomial;
}
