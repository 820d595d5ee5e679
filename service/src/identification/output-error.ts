import type { MotionWindow } from './motion-record.js';
import { FULL_PARAMETERS, PRODUCT_SUMS } from './motion-regression.js';
import { packedIndex } from './symmetric.js';

/**
 * Output error over windows of steady direction.
 *
 * Inside a window, with s = ±1 the direction and x the plant's response from rest to an input,
 *
 *   y(t) = p₀ + v₀·φ(t) + K±·x[u(t−τ)] − s·c±·x[1] + e(t),   φ = (1 − e^(−αt))/α,  x[1] = t − φ,
 *   c⁺ = K⁺(f + b),  c⁻ = K⁻(f − b),
 *
 * exact for an output held over T that acts τ late. The start p₀, v₀ of each window is its own and is projected
 * out; K± and c± are linear; α and τ are found by Gauss–Newton (separable least squares, Golub & Pereyra 1973).
 * With white position noise this is the maximum-likelihood estimate, and it needs no filter.
 * (Output-error method: Ljung, System Identification, 1999, ch. 7; both from memory.)
 */

/** The unknowns in the order of the packed sums. */
export interface OutputErrorPlant {
  /** α, rad/s. */
  readonly pole: number;
  /** τ, s. */
  readonly deadTime: number;
  /** K⁺, K⁻, (mm/s)/%. */
  readonly gainForward: number;
  readonly gainReverse: number;
  /** c⁺, c⁻, mm/s. */
  readonly dragForward: number;
  readonly dragReverse: number;
  /** Change of K and of α over the whole record, relative and linear in time; the figures above are the means. */
  readonly gainTrend: number;
  readonly poleTrend: number;
}

/** The plant at a moment of the record, `along` from −½ at its start to ½ at its end. */
export function plantAt(plant: OutputErrorPlant, along: number): OutputErrorPlant {
  const scale = 1 + plant.gainTrend * along;
  return {
    ...plant,
    pole: plant.pole * (1 + plant.poleTrend * along),
    gainForward: plant.gainForward * scale,
    gainReverse: plant.gainReverse * scale,
    dragForward: plant.dragForward * scale,
    dragReverse: plant.dragReverse * scale,
  };
}

const COLUMNS = FULL_PARAMETERS + 1;
/** Steps of the difference quotients, relative for α, in samples for τ. */
const POLE_STEP = 1e-4;
const DELAY_STEP = 1e-3;

/** Exact response over one sample to an output that changes φT after its start (φT: fraction of τ). */
interface HoldStep {
  readonly decay: number;
  readonly drift: number;
  readonly velocityOld: number;
  readonly velocityNew: number;
  readonly positionOld: number;
  readonly positionNew: number;
  readonly wholeDelay: number;
}

function holdStep(pole: number, deadTime: number, sampleTime: number): HoldStep {
  const delay = deadTime / sampleTime;
  const wholeDelay = Math.floor(delay + 1e-9);
  const late = Math.max(0, delay - wholeDelay) * sampleTime;
  const rest = sampleTime - late;
  const rise = (t: number): number => -Math.expm1(-pole * t);
  const velocityLate = rise(late);
  const riseRest = rise(rest);
  return {
    decay: 1 - rise(sampleTime),
    drift: rise(sampleTime) / pole,
    velocityOld: velocityLate * (1 - riseRest),
    velocityNew: riseRest,
    positionOld: late - velocityLate / pole + (velocityLate * riseRest) / pole,
    positionNew: rest - riseRest / pole,
    wholeDelay,
  };
}

/** x[u]: position of a plant with K = 1 from rest, at the samples of a window. */
function respond(u: Float64Array, window: MotionWindow, step: HoldStep, x: Float64Array): void {
  const { decay, drift, velocityOld, velocityNew, positionOld, positionNew, wholeDelay } = step;
  let p = 0;
  let v = 0;
  const n = window.to - window.from;
  let at = window.from - wholeDelay;
  let old = u[Math.max(at - 1, 0)]!;
  for (let k = 0; k < n; k++, at++) {
    x[k] = p;
    const fresh = u[at > 0 ? at : 0]!;
    p += drift * v + positionOld * old + positionNew * fresh;
    v = decay * v + velocityOld * old + velocityNew * fresh;
    old = fresh;
  }
}

/** Short windows are looked at more closely: eight samples at least. */
const strideIn = (samples: number, stride: number): number => Math.max(1, Math.min(stride, samples >> 3));

/** Work arrays for windows of up to `length` samples. */
export class WindowScratch {
  readonly x: Float64Array;
  readonly xPole: Float64Array;
  readonly xDelay: Float64Array;
  readonly phi: Float64Array;
  readonly residual: Float64Array;

  constructor(length: number) {
    this.x = new Float64Array(length);
    this.xPole = new Float64Array(length);
    this.xDelay = new Float64Array(length);
    this.phi = new Float64Array(length);
    this.residual = new Float64Array(length);
  }
}

/**
 * The window's start by least squares and what is left: fills `residual` (NaN where the row is missing) with
 * y − ŷ, and `x` and `phi` with the responses it used.
 *
 * @param stride about every how many samples one is looked at; the others' residuals are not filled.
 *
 * @returns sum of squared residuals and the number of measured samples.
 */
export function windowResidual(
  position: Float64Array,
  output: Float64Array,
  sampleTime: number,
  window: MotionWindow,
  plant: OutputErrorPlant,
  scratch: WindowScratch,
  stride = 1,
): { square: number; measured: number; velocity: number; start: number } {
  const { x, phi, residual } = scratch;
  const n = window.to - window.from;
  const every = strideIn(n, stride);
  respond(output, window, holdStep(plant.pole, plant.deadTime, sampleTime), x);
  const forward = window.direction > 0;
  const gain = forward ? plant.gainForward : plant.gainReverse;
  const drag = forward ? -plant.dragForward : plant.dragReverse;
  const fade = Math.exp(-plant.pole * sampleTime * every);
  let e = 1;
  let m = 0;
  let sPhi = 0;
  let sPhi2 = 0;
  let sR = 0;
  let sPhiR = 0;
  for (let k = 0; k < n; k += every) {
    const f = (1 - e) / plant.pole;
    e *= fade;
    phi[k] = f;
    const r = position[window.from + k]! - gain * x[k]! - drag * (k * sampleTime - f);
    residual[k] = r;
    if (r !== r) continue;
    m++;
    sPhi += f;
    sPhi2 += f * f;
    sR += r;
    sPhiR += f * r;
  }
  const mean = sPhi / m;
  const velocity = (sPhiR - mean * sR) / (sPhi2 - mean * sPhi);
  const start = sR / m - velocity * mean;
  let square = 0;
  for (let k = 0; k < n; k += every) {
    const r = (residual[k]! -= start + velocity * phi[k]!);
    if (r === r) square += r * r;
  }
  return { square, measured: m, velocity, start };
}

/**
 * Sums of products of one window, with p₀ and v₀ projected out, packed as `normalEquations` expects them:
 * columns ∂ŷ/∂α, x⁺, x⁻, −x[1]⁺, +x[1]⁻, ∂ŷ/∂τ and the residual at `plant`.
 *
 * @param sums PRODUCT_SUMS numbers from `offset`, overwritten.
 * @param derivatives false leaves the columns of α and τ out.
 */
export function windowSums(
  position: Float64Array,
  output: Float64Array,
  sampleTime: number,
  window: MotionWindow,
  plant: OutputErrorPlant,
  scratch: WindowScratch,
  sums: Float64Array,
  offset: number,
  derivatives = true,
  stride = 1,
): void {
  const { x, xPole, xDelay, phi, residual } = scratch;
  const { velocity } = windowResidual(position, output, sampleTime, window, plant, scratch, stride);
  const { pole, deadTime } = plant;
  const dPole = POLE_STEP * pole;
  const dDelay = DELAY_STEP * sampleTime;
  if (derivatives) {
    respond(output, window, holdStep(pole + dPole, deadTime, sampleTime), xPole);
    respond(output, window, holdStep(pole, deadTime + dDelay, sampleTime), xDelay);
  }
  const forward = window.direction > 0;
  const gain = forward ? plant.gainForward : plant.gainReverse;
  const drag = forward ? -plant.dragForward : plant.dragReverse;
  const n = window.to - window.from;
  const every = strideIn(n, stride);
  const gainPerPole = gain / dPole;
  const gainPerDelay = gain / dDelay;
  // Responses grow with t³; about their middle the sums keep their digits.
  let m = 0;
  let s0 = 0,
    s1 = 0,
    s2 = 0,
    s3 = 0,
    s4 = 0; // Σφ and Σ of the four columns
  let q00 = 0,
    q10 = 0,
    q20 = 0,
    q30 = 0,
    q40 = 0,
    qr0 = 0,
    sr = 0; // with φ
  let q11 = 0,
    q12 = 0,
    q13 = 0,
    q14 = 0,
    q1r = 0;
  let q22 = 0,
    q23 = 0,
    q24 = 0,
    q2r = 0;
  let q33 = 0,
    q34 = 0,
    q3r = 0;
  let q44 = 0,
    q4r = 0,
    qrr = 0;
  for (let k = 0; k < n; k += every) {
    const r = residual[k]!;
    if (r !== r) continue;
    const f = phi[k]!;
    const t = k * sampleTime;
    // ∂φ/∂α = (t·e^(−αt) − φ)/α, and x[1] = t − φ.
    const dPhi = (t * (1 - pole * f) - f) / pole;
    const c1 = gainPerPole * (xPole[k]! - x[k]!) + (velocity - drag) * dPhi;
    const c2 = x[k]!;
    const c3 = t - f;
    const c4 = gainPerDelay * (xDelay[k]! - x[k]!);
    m++;
    s0 += f;
    s1 += c1;
    s2 += c2;
    s3 += c3;
    s4 += c4;
    sr += r;
    q00 += f * f;
    q10 += f * c1;
    q20 += f * c2;
    q30 += f * c3;
    q40 += f * c4;
    qr0 += f * r;
    q11 += c1 * c1;
    q12 += c1 * c2;
    q13 += c1 * c3;
    q14 += c1 * c4;
    q1r += c1 * r;
    q22 += c2 * c2;
    q23 += c2 * c3;
    q24 += c2 * c4;
    q2r += c2 * r;
    q33 += c3 * c3;
    q34 += c3 * c4;
    q3r += c3 * r;
    q44 += c4 * c4;
    q4r += c4 * r;
    qrr += r * r;
  }
  // Projection: S_ij − (Σ1·products)·inverse·(…), for the nuisance columns 1 and φ.
  const mean = s0 / m;
  const square = q00 - mean * s0;
  const u1 = q10 - mean * s1,
    u2 = q20 - mean * s2,
    u3 = q30 - mean * s3,
    u4 = q40 - mean * s4;
  const ur = qr0 - mean * sr;
  const left = (q: number, si: number, sj: number, ui: number, uj: number): number =>
    q - (si * sj) / m - (ui * uj) / square;
  const b = forward ? 1 : 2;
  const d = forward ? 3 : 4;
  const sign = forward ? -1 : 1;
  sums.fill(0, offset, offset + PRODUCT_SUMS);
  const put = (i: number, j: number, value: number): void => {
    sums[offset + packedIndex(COLUMNS, i, j)] = value;
  };
  put(0, 0, left(q11, s1, s1, u1, u1));
  put(0, b, left(q12, s1, s2, u1, u2));
  put(0, d, sign * left(q13, s1, s3, u1, u3));
  put(0, 5, left(q14, s1, s4, u1, u4));
  put(0, 6, left(q1r, s1, sr, u1, ur));
  put(b, b, left(q22, s2, s2, u2, u2));
  put(b, d, sign * left(q23, s2, s3, u2, u3));
  put(b, 5, left(q24, s2, s4, u2, u4));
  put(b, 6, left(q2r, s2, sr, u2, ur));
  put(d, d, left(q33, s3, s3, u3, u3));
  put(d, 5, sign * left(q34, s3, s4, u3, u4));
  put(d, 6, sign * left(q3r, s3, sr, u3, ur));
  put(5, 5, left(q44, s4, s4, u4, u4));
  put(5, 6, left(q4r, s4, sr, u4, ur));
  put(6, 6, left(qrr, sr, sr, ur, ur));
}
