/**
 * Small dense symmetric systems: the normal equations of a handful of unknowns.
 *
 * Matrices are row-major Float64Array of length p·p. Sums of products arrive packed: the upper triangle
 * by rows, p(p+1)/2 numbers.
 */

/** Position of (row, column), row ≤ column, in the packed upper triangle of a p×p matrix. */
export function packedIndex(p: number, row: number, column: number): number {
  return row * p - (row * (row - 1)) / 2 + (column - row);
}

/**
 * Room for one factor at a time, its scale and a right side: a typed array of this size costs more to allocate than to
 * fill. Nothing here calls back, so nobody sees it half-used.
 */
let room = roomFor(8);

function roomFor(p: number): { p: number; l: Float64Array; scale: Float64Array; x: Float64Array } {
  return { p, l: new Float64Array(p * p), scale: new Float64Array(p), x: new Float64Array(p) };
}

/** Cholesky's factor L of the matrix scaled to unit diagonal, and the scale, into `room`; false as `invertPositive` says. */
function factor(a: Float64Array, p: number, tolerance: number): boolean {
  if (p > room.p) room = roomFor(p);
  const { l, scale } = room;
  for (let i = 0; i < p; i++) {
    const d = a[i * p + i]!;
    if (!(d > 0)) return false;
    scale[i] = 1 / Math.sqrt(d);
  }
  for (let i = 0; i < p; i++) {
    for (let j = 0; j <= i; j++) {
      let s = a[i * p + j]! * scale[i]! * scale[j]!;
      for (let k = 0; k < j; k++) s -= l[i * p + k]! * l[j * p + k]!;
      if (i === j) {
        if (!(s > tolerance)) return false;
        l[i * p + i] = Math.sqrt(s);
      } else {
        l[i * p + j] = s / l[j * p + j]!;
      }
    }
  }
  return true;
}

/** L·Lᵀ·x = x in place. */
function substitute(l: Float64Array, x: Float64Array, p: number): void {
  for (let i = 0; i < p; i++) {
    let s = x[i]!;
    for (let k = 0; k < i; k++) s -= l[i * p + k]! * x[k]!;
    x[i] = s / l[i * p + i]!;
  }
  for (let i = p - 1; i >= 0; i--) {
    let s = x[i]!;
    for (let k = i + 1; k < p; k++) s -= l[k * p + i]! * x[k]!;
    x[i] = s / l[i * p + i]!;
  }
}

/**
 * Inverse of a symmetric positive definite matrix by Cholesky's factorisation of the matrix scaled to unit
 * diagonal.
 *
 * @param a p×p, row-major; left unchanged.
 * @param inverse where it goes, p×p.
 * @returns the inverse, or null when a pivot of the scaled matrix falls below `tolerance`: the columns are
 * then too nearly dependent to tell apart.
 */
export function invertPositive(
  a: Float64Array,
  p: number,
  inverse: Float64Array = new Float64Array(p * p),
  tolerance = 1e-10,
): Float64Array | null {
  if (!factor(a, p, tolerance)) return null;
  const { l, scale, x } = room;
  for (let c = 0; c < p; c++) {
    x.fill(0);
    x[c] = 1;
    substitute(l, x, p);
    for (let i = 0; i < p; i++) inverse[i * p + c] = x[i]! * scale[i]! * scale[c]!;
  }
  return inverse;
}

/** x of a·x = b for a symmetric positive definite a; null as `invertPositive` says. */
export function solvePositive(
  a: Float64Array,
  b: Float64Array,
  p: number,
  tolerance = 1e-10,
): Float64Array | null {
  if (!factor(a, p, tolerance)) return null;
  const { l, scale } = room;
  const x = new Float64Array(p);
  for (let i = 0; i < p; i++) x[i] = b[i]! * scale[i]!;
  substitute(l, x, p);
  for (let i = 0; i < p; i++) x[i]! *= scale[i]!;
  return x;
}

/** gᵀ·C·h for a p×p matrix C. */
export function quadraticForm(
  g: ArrayLike<number>,
  c: Float64Array,
  h: ArrayLike<number>,
  p: number,
): number {
  let s = 0;
  for (let i = 0; i < p; i++) {
    let row = 0;
    for (let j = 0; j < p; j++) row += c[i * p + j]! * h[j]!;
    s += g[i]! * row;
  }
  return s;
}

/** A·B of two p×p matrices, into `product`. */
export function multiply(
  a: Float64Array,
  b: Float64Array,
  p: number,
  product: Float64Array = new Float64Array(p * p),
): Float64Array {
  for (let i = 0; i < p; i++)
    for (let j = 0; j < p; j++) {
      let s = 0;
      for (let k = 0; k < p; k++) s += a[i * p + k]! * b[k * p + j]!;
      product[i * p + j] = s;
    }
  return product;
}
