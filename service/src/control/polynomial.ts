import { EigenvalueDecomposition, Matrix } from 'ml-matrix';

/** Real polynomial, coefficients by ascending power: p(s) = Σ p[i] sⁱ. */
export type Polynomial = readonly number[];

export interface Complex {
  re: number;
  im: number;
}

export const abs = (z: Complex): number => Math.hypot(z.re, z.im);

/** Product of two polynomials. */
export function multiply(p: Polynomial, q: Polynomial): number[] {
  const product = new Array<number>(p.length + q.length - 1).fill(0);
  for (let i = 0; i < p.length; i++) for (let j = 0; j < q.length; j++) product[i + j]! += p[i]! * q[j]!;
  return product;
}

/** p + factor·q. */
export function add(p: Polynomial, q: Polynomial, factor = 1): number[] {
  const sum = new Array<number>(Math.max(p.length, q.length)).fill(0);
  for (let i = 0; i < p.length; i++) sum[i] = p[i]!;
  for (let i = 0; i < q.length; i++) sum[i]! += factor * q[i]!;
  return sum;
}

/** p to a whole power n ≥ 0. */
export function power(p: Polynomial, n: number): number[] {
  let result = [1];
  for (let i = 0; i < n; i++) result = multiply(result, p);
  return result;
}

/** dp/ds. */
export function derivative(p: Polynomial): number[] {
  return p.length < 2 ? [0] : p.slice(1).map((c, i) => c * (i + 1));
}

/** p(x) for a real x (Horner). */
export function evaluate(p: Polynomial, x: number): number {
  let value = 0;
  for (let i = p.length - 1; i >= 0; i--) value = value * x + p[i]!;
  return value;
}

/** p(z) for a complex z (Horner). */
export function evaluateComplex(p: Polynomial, z: Complex): Complex {
  let re = 0;
  let im = 0;
  for (let i = p.length - 1; i >= 0; i--) {
    const t = re * z.re - im * z.im + p[i]!;
    im = re * z.im + im * z.re;
    re = t;
  }
  return { re, im };
}

/** p(jω) = E(x) + jω·O(x) as polynomials in x = ω². */
export function evenAndOdd(p: Polynomial): { even: number[]; odd: number[] } {
  const signed = (c: number, k: number): number => (k % 2 === 0 ? c : -c);
  const even = p.filter((_, i) => i % 2 === 0).map(signed);
  const odd = p.filter((_, i) => i % 2 === 1).map(signed);
  return { even, odd: odd.length === 0 ? [0] : odd };
}

/** |p(jω)|² as a polynomial in x = ω²: E(x)² + x·O(x)². */
export function squaredMagnitude(p: Polynomial): number[] {
  const { even, odd } = evenAndOdd(p);
  return trim(add(multiply(even, even), [0, ...multiply(odd, odd)]));
}

/** p without leading coefficients that are exactly zero. */
export function trim(p: Polynomial): number[] {
  let n = p.length;
  while (n > 1 && p[n - 1] === 0) n--;
  return p.slice(0, n);
}

/**
 * All roots of a real polynomial, repeated ones repeated.
 *
 * 1. s is scaled by the power of two next to the geometric mean of the root magnitudes; the balanced companion matrix (Parlett &
 *    Reinsch 1969) goes through ml-matrix's eigenvalue solver.
 * 2. Every root is polished by the Aberth–Ehrlich iteration (Aberth 1973), which is Newton's method that
 *    keeps the roots apart, until |p(z)| is at its own rounding level.
 * 3. A root of multiplicity m comes out of any eigenvalue solver as m roots about ε^(1/m) apart. For each
 *    close group of m roots the simple root r of the (m−1)-th derivative near their mean is found by Newton's
 *    method; when p, p', …, p^(m−2) all vanish at r within the stated uncertainty of the coefficients, the
 *    group *is* an m-fold root as far as the coefficients can say, and is given as r, m times (the idea of
 *    Zeng, Computing multiple roots of inexact polynomials, Math. Comp. 74, 2005).
 *
 * Complex roots come in exact conjugate pairs, the upper one first; real roots have im exactly 0. Sorted by
 * descending real part.
 *
 * @param p coefficients by ascending power; leading zeros are dropped, a constant has no roots
 * @param uncertainty absolute rounding uncertainty of each coefficient; |p[i]|·4ε when absent
 * @throws RangeError when a coefficient is not finite or all are zero
 */
export function roots(p: Polynomial, uncertainty?: readonly number[]): Complex[] {
  if (!p.every(Number.isFinite)) throw new RangeError('a polynomial needs finite coefficients');
  const full = trim(p);
  if (full.length === 1) {
    if (full[0] === 0) throw new RangeError('the zero polynomial has no definite roots');
    return [];
  }
  let atZero = 0;
  while (full[atZero] === 0) atZero++;
  const core = full.slice(atZero);
  const degree = core.length - 1;
  const zeros = Array.from({ length: atZero }, () => ({ re: 0, im: 0 }));
  if (degree === 0) return zeros;

  const lead = core[degree]!;
  const scale = 2 ** Math.round((Math.log2(Math.abs(core[0]!)) - Math.log2(Math.abs(lead))) / degree);
  const monic = core.map((c, i) => (c / lead) * scale ** (i - degree));
  const errors = monic.map((c, i) => {
    const given = uncertainty?.[i + atZero];
    const own = 4 * Number.EPSILON * Math.abs(c);
    return given === undefined ? own : Math.max(own, Math.abs(given / lead) * scale ** (i - degree));
  });
  const found = degree === 1 ? [{ re: -monic[0]!, im: 0 }] : mergeMultiple(monic, errors, initial(monic));
  return [...zeros, ...found.map((z) => ({ re: z.re * scale, im: z.im * scale }))].sort(
    (a, b) => b.re - a.re || Math.abs(a.im) - Math.abs(b.im) || b.im - a.im,
  );
}

/** Positive real roots of p, ascending. */
export function positiveRoots(p: Polynomial): number[] {
  if (trim(p).length === 1) return [];
  return roots(p)
    .filter((z) => z.im === 0 && z.re > 0)
    .map((z) => z.re)
    .sort((a, b) => a - b);
}

/** Roots of a scaled monic polynomial of degree ≥ 2 before multiplicities are looked at. */
function initial(monic: Polynomial): Complex[] {
  if (monic.length === 3) return quadratic(monic[1]!, monic[0]!);
  return polish(monic, companionEigenvalues(monic));
}

/** s² + bs + c without cancellation. */
function quadratic(b: number, c: number): Complex[] {
  const half = -b / 2;
  const discriminant = half * half - c;
  if (discriminant < 0) {
    const im = Math.sqrt(-discriminant);
    return [
      { re: half, im },
      { re: half, im: -im },
    ];
  }
  const big = half + (half >= 0 ? 1 : -1) * Math.sqrt(discriminant);
  return [
    { re: big, im: 0 },
    { re: big === 0 ? 0 : c / big, im: 0 },
  ];
}

function companionEigenvalues(monic: Polynomial): Complex[] {
  const n = monic.length - 1;
  const companion = Matrix.zeros(n, n);
  for (let i = 0; i < n; i++) {
    companion.set(0, i, -monic[n - 1 - i]!);
    if (i > 0) companion.set(i, i - 1, 1);
  }
  return eigenvalues(companion);
}

/**
 * Eigenvalues of a real square matrix (which is balanced in place): ml-matrix, conjugate pairs adjacent.
 *
 * @throws RangeError when an entry is not finite; the solver would not end
 */
export function eigenvalues(matrix: Matrix): Complex[] {
  if (!matrix.to1DArray().every(Number.isFinite)) throw new RangeError('a matrix needs finite entries');
  balance(matrix);
  const evd = new EigenvalueDecomposition(matrix, { assumeSymmetric: false });
  const re = evd.realEigenvalues;
  const im = evd.imaginaryEigenvalues;
  return re.map((x, i) => ({ re: x, im: im[i]! }));
}

/** Diagonal similarity by powers of two that evens out row and column norms (Parlett & Reinsch 1969). */
function balance(m: Matrix): void {
  const n = m.rows;
  for (let changed = true; changed;) {
    changed = false;
    for (let i = 0; i < n; i++) {
      let row = 0;
      let column = 0;
      for (let j = 0; j < n; j++) {
        if (j === i) continue;
        row += Math.abs(m.get(i, j));
        column += Math.abs(m.get(j, i));
      }
      if (row === 0 || column === 0) continue;
      const f = 2 ** Math.round(Math.log2(row / column) / 2);
      if (f === 1 || (column * f + row / f) / (column + row) > 0.95) continue;
      changed = true;
      for (let j = 0; j < n; j++) {
        m.set(i, j, m.get(i, j) / f);
        m.set(j, i, m.get(j, i) * f);
      }
    }
  }
}

/**
 * Aberth–Ehrlich iteration on the upper half plane; conjugates are implied, so that pairs stay exact pairs
 * and real roots stay real.
 */
function polish(monic: Polynomial, start: Complex[]): Complex[] {
  const n = monic.length - 1;
  const slope = derivative(monic);
  const upper = start.filter((z) => z.im >= 0).map((z) => ({ ...z }));
  const settled = upper.map(() => false);
  for (let round = 0; round < 40 && settled.includes(false); round++) {
    for (let i = 0; i < upper.length; i++) {
      if (settled[i]) continue;
      const z = upper[i]!;
      const value = evaluateComplex(monic, z);
      const size = abs(z);
      let level = 0;
      for (let k = n; k >= 0; k--) level = level * size + Math.abs(monic[k]!);
      if (abs(value) <= 2 * Number.EPSILON * level) {
        settled[i] = true;
        continue;
      }
      // the Newton correction w and its Aberth form w/(1 − w·Σ 1/(z − zⱼ))
      const w = divide(value, evaluateComplex(slope, z));
      let sumRe = 0;
      let sumIm = 0;
      for (let j = 0; j < upper.length; j++) {
        const other = upper[j]!;
        const re = z.re - other.re;
        for (const im of other.im === 0 ? [z.im] : [z.im - other.im, z.im + other.im]) {
          const square = re * re + im * im;
          if (square === 0) continue;
          sumRe += re / square;
          sumIm -= im / square;
        }
      }
      const step = divide(w, {
        re: 1 - (w.re * sumRe - w.im * sumIm),
        im: -(w.re * sumIm + w.im * sumRe),
      });
      if (!Number.isFinite(step.re) || !Number.isFinite(step.im)) {
        settled[i] = true;
        continue;
      }
      z.re -= step.re;
      if (z.im !== 0) z.im = Math.abs(z.im - step.im);
      if (abs(step) <= Number.EPSILON * abs(z)) settled[i] = true;
    }
  }
  return upper.flatMap((z) => (z.im === 0 ? [z] : [z, { re: z.re, im: -z.im }]));
}

export function divide(a: Complex, b: Complex): Complex {
  const d = b.re * b.re + b.im * b.im;
  return { re: (a.re * b.re + a.im * b.im) / d, im: (a.im * b.re - a.re * b.im) / d };
}

/** Relative distances within which roots are tried as one multiple root, widest first. */
const GROUP_RADII = [0.05, 5e-3, 5e-4, 5e-5, 5e-6, 5e-7];

/** Replaces groups of close roots by one multiple root where the coefficients cannot tell the difference. */
function mergeMultiple(monic: Polynomial, errors: readonly number[], found: Complex[]): Complex[] {
  const done: Complex[] = [];
  let open = found.slice();
  for (const radius of GROUP_RADII) {
    const groups = closeGroups(open, radius);
    open = [];
    for (const group of groups) {
      const m = group.length;
      const merged = m > 1 ? multipleRoot(monic, errors, group) : null;
      if (merged) for (let i = 0; i < m; i++) done.push({ ...merged });
      else open.push(...group);
    }
    if (open.length < 2) break;
  }
  return [...done, ...open];
}

function closeGroups(points: readonly Complex[], radius: number): Complex[][] {
  const groups: Complex[][] = [];
  for (const z of points) {
    const near = groups.filter((g) =>
      g.some((o) => Math.hypot(o.re - z.re, o.im - z.im) <= radius * Math.max(abs(o), abs(z))),
    );
    const merged = [z, ...near.flat()];
    for (const g of near) groups.splice(groups.indexOf(g), 1);
    groups.push(merged);
  }
  return groups;
}

function multipleRoot(
  monic: Polynomial,
  errors: readonly number[],
  group: readonly Complex[],
): Complex | null {
  const m = group.length;
  let r: Complex = {
    re: group.reduce((s, z) => s + z.re, 0) / m,
    im: group.reduce((s, z) => s + z.im, 0) / m,
  };
  if (Math.abs(r.im) <= 1e-9 * abs(r)) r = { re: r.re, im: 0 };
  let simple: Polynomial = monic;
  for (let i = 1; i < m; i++) simple = derivative(simple);
  const slope = derivative(simple);
  for (let i = 0; i < 8; i++) {
    const step = divide(evaluateComplex(simple, r), evaluateComplex(slope, r));
    if (!Number.isFinite(step.re) || !Number.isFinite(step.im)) return null;
    r = { re: r.re - step.re, im: r.im === 0 ? 0 : r.im - step.im };
  }
  const size = abs(r);
  let p: Polynomial = monic;
  let e: Polynomial = errors;
  for (let j = 0; j <= m - 2; j++) {
    if (abs(evaluateComplex(p, r)) > 4 * evaluate(e, size)) return null;
    p = derivative(p);
    e = derivative(e);
  }
  return r;
}
