import { Matrix } from 'ml-matrix';
import { type Controller, checkController } from './move.js';
import {
  checkPlant,
  deadTimeInSamples,
  heldPositionShare,
  type Plant,
  UnphysicalInputError,
  zeroOrderHold,
} from './plant.js';
import {
  abs,
  add,
  type Complex,
  eigenvalues,
  multiply,
  type Polynomial,
  power,
  roots,
} from './polynomial.js';
import { checkGains, type Gains } from './pole-placement.js';
import { closedLoopPoles, effectiveGains, isStable } from './loop.js';

/**
 * The open loop C(z)G(z) of the controller as it runs: integrator updated before use, derivative by backward
 * difference, exact zero-order hold, output delay and dead time.
 *
 * Written in the delta operator δ = (z − 1)/T of Middleton & Goodwin (1986), in which nothing cancels for small
 * sample times and the coefficients tend to those of the continuous loop. With z = 1 + Tδ, α_d = (1 − a)/T:
 *
 *     C = [Ki + (Kp + 2KiT)δ + (KpT + KiT² + Kd)δ²] / (δz)
 *     G = (n₁z + n₂) / (δ(δ + α_d)·z^(d+1))
 *
 * n₁ from the output of the current sample and n₂ from the one before (0 unless the dead time is a fraction of
 * a sample).
 *
 * Returned are numerator and denominator by ascending power of δ; one δ less in both when Ki = 0.
 */
export function sampledOpenLoop(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  outputDelaySamples: number,
): { numerator: number[]; denominator: number[] } {
  const T = sampleTime;
  const { kp, ki, kd } = effectiveGains(plant, gains);
  const late = deadTimeInSamples(plant.deadTime ?? 0, T);
  const alpha = -Math.expm1(-plant.pole * T) / T;
  const held = zeroOrderHold(plant, T);
  const z: Polynomial = [1, T];
  let path: number[];
  let delays = outputDelaySamples + late.whole;
  if (late.fraction === 0) {
    // K·α_d and K(1 − φ) in closed form, so that small αT loses nothing
    path = [plant.gain * alpha, plant.gain * heldPositionShare(plant.pole * T)];
  } else {
    const rest = zeroOrderHold(plant, T * (1 - late.fraction));
    // n(δ) of an input that leaves a position and a velocity at the end of its sample
    const [now, before] = [
      [rest.positionFromOutput, rest.velocityFromOutput],
      [held.positionFromOutput - rest.positionFromOutput, held.velocityFromOutput - rest.velocityFromOutput],
    ].map(([y = 0, v = 0]) => [(y * alpha) / T + (held.positionFromVelocity * v) / (T * T), y / T]) as [
      number[],
      number[],
    ];
    path = add(multiply(now, z), before);
    delays += 1;
  }
  const from = ki === 0 ? 1 : 0;
  const controller = [ki, kp + 2 * ki * T, kp * T + ki * T * T + kd].slice(from);
  const plantAndIntegrator = [0, 0, alpha, 1].slice(from);
  return {
    numerator: multiply(controller, path),
    denominator: multiply(plantAndIntegrator, power(z, 1 + delays)),
  };
}

/** Δ of the sampled loop by ascending power of δ: denominator + numerator of `sampledOpenLoop`. */
function sampledCharacteristic(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  outputDelaySamples: number,
): number[] {
  const { numerator, denominator } = sampledOpenLoop(plant, gains, sampleTime, outputDelaySamples);
  return add(denominator, numerator);
}

/** Delay in whole samples up to which the poles come from the δ-polynomial, beyond from the state matrix. */
const POLYNOMIAL_DELAYS = 4;
/** Most delay, output delay and dead time together, that the sampled loop is analysed with, samples. */
const MAX_ANALYSED_DELAYS = 100;

/**
 * Eigenvalues of the sampled loop in z: the four states y, v, I, y₋₁ and one per sample of delay. They, not
 * the s-plane design, say whether the loop as it runs is stable and damped. Sorted by descending magnitude.
 *
 * Up to a few samples of delay they are the roots of the δ-polynomial, which keeps all digits near z = 1;
 * with more delay the many roots near z = 0 make any polynomial ill-conditioned, and the eigenvalues of the
 * state matrix are taken.
 *
 * @throws UnphysicalInputError when output delay and dead time are more than 100 samples together
 */
export function sampledPoles(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  outputDelaySamples = 0,
): Complex[] {
  const delays = outputDelaySamples + (plant.deadTime ?? 0) / sampleTime;
  if (delays > MAX_ANALYSED_DELAYS)
    throw new UnphysicalInputError(
      'plant.deadTime',
      `and output delay are ${Math.round(delays)} samples long; at most ${MAX_ANALYSED_DELAYS} are analysed`,
    );
  let poles: Complex[];
  if (delays <= POLYNOMIAL_DELAYS)
    poles = roots(sampledCharacteristic(plant, gains, sampleTime, outputDelaySamples)).map((d) => ({
      re: 1 + sampleTime * d.re,
      im: sampleTime * d.im,
    }));
  else {
    const { a, n } = sampledStates(plant, gains, sampleTime, outputDelaySamples);
    poles = eigenvalues(Matrix.from1DArray(n, n, a));
  }
  return poles.sort((p, q) => abs(q) - abs(p) || q.re - p.re || q.im - p.im);
}

/** Damping ratio −Re s/|s| of a pole in z, with s = ln(z)/T; 1 at z = 0, negative outside the unit circle. */
export function poleDamping(z: Complex): number {
  const size = Math.hypot(z.re, z.im);
  if (size === 0) return 1;
  const decay = -Math.log(size);
  const turn = Math.atan2(z.im, z.re);
  return decay === 0 && turn === 0 ? 0 : decay / Math.hypot(decay, turn);
}

/**
 * Whether all roots of the sampled characteristic polynomial lie inside the unit circle: the bilinear map
 * z = (1 + w)/(1 − w), δ = (2/T)·w/(1 − w), then Routh's table.
 */
function isSampledStable(plant: Plant, gains: Gains, sampleTime: number, delays: number): boolean {
  const delta = sampledCharacteristic(plant, gains, sampleTime, delays);
  const n = delta.length - 1;
  const p = new Array<number>(n + 1).fill(0);
  // w in units of (T/2)·σ keeps the table's numbers together
  const sigma = Math.abs(delta[0]! / delta[n]!) ** (1 / n) || 1;
  const edge = (-sigma * sampleTime) / 2;
  let scale = 1;
  for (let i = n; i >= 0; i--) {
    // δ^i becomes w^i·(1 + edge·w)^(n−i), the binomial written out
    let term = delta[i]! * scale;
    for (let k = 0; k <= n - i; k++) {
      p[i + k]! += term;
      term *= (edge * (n - i - k)) / (k + 1);
    }
    scale /= sigma;
  }
  return isHurwitz(p);
}

/** Routh's criterion for a real polynomial by ascending power. */
function isHurwitz(p: readonly number[]): boolean {
  const n = p.length - 1;
  const sign = Math.sign(p[n]!);
  if (sign === 0) return false;
  let upper: number[] = [];
  let lower: number[] = [];
  for (let i = n; i >= 0; i -= 2) upper.push(sign * p[i]!);
  for (let i = n - 1; i >= 0; i -= 2) lower.push(sign * p[i]!);
  while (lower.length > 0) {
    const pivot = lower[0]!;
    if (!(pivot > 0)) return false;
    const ratio = upper[0]! / pivot;
    // the next row takes the place of the upper one
    for (let k = 1; k < upper.length; k++) upper[k - 1] = upper[k]! - ratio * (lower[k] ?? 0);
    upper.pop();
    [upper, lower] = [lower, upper];
  }
  return true;
}

/**
 * Smallest sample time at which the loop as it runs (with its output delay in samples and its dead time in
 * seconds) stops being stable, s: a scan upwards in steps of 8 %, then bisection on Routh's criterion.
 *
 * Null when there is none: the continuous loop is not stable itself, or, with dead time, the loop is already
 * unstable at a tenth of it, where sampling adds almost nothing.
 */
export function maxStableSampleTime(plant: Plant, gains: Gains, outputDelaySamples = 0): number | null {
  checkPlant(plant);
  checkGains(gains);
  if (!isStable(plant, gains)) return null;
  const sizes = closedLoopPoles(plant, gains).map(abs);
  const fastest = Math.max(...sizes, plant.pole);
  const slowest = Math.min(...sizes, plant.pole);
  let low = Math.max(0.01 / (fastest * (1 + outputDelaySamples)), (plant.deadTime ?? 0) / 10);
  if (!isSampledStable(plant, gains, low, outputDelaySamples)) return null;
  const last = 1e4 / slowest;
  let high = low;
  do {
    low = high;
    if (low > last) return null;
    high = low * 1.08;
  } while (isSampledStable(plant, gains, high, outputDelaySamples));
  while (high - low > 1e-12 * high) {
    const middle = (low + high) / 2;
    if (middle <= low || middle >= high) break;
    if (isSampledStable(plant, gains, middle, outputDelaySamples)) low = middle;
    else high = middle;
  }
  return low;
}

/**
 * RMS of the output, %, that the position resolution q causes while the axis holds: white position noise of
 * variance q²/12 per sample through the sampled loop, from the discrete Lyapunov equation X = AXAᵀ + BBᵀ,
 * solved by Smith's doubling (SIAM J. Appl. Math. 16, 1968). Roughly q/√12·√((Kp + Kd/T)² + (Kd/T)²).
 *
 * Real quantisers stay within about ±50 % of it and exceed it when the motion per sample is far below a count.
 * Null when the sampled loop is not stable.
 */
export function outputRipple(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  outputDelaySamples: number,
  resolution: number,
): number | null {
  const gain = noiseToOutput(plant, gains, sampleTime, outputDelaySamples);
  return gain === null ? null : (resolution / Math.sqrt(12)) * gain;
}

/** x⁺ = Ax + B·noise, u = Cx − reaction·noise, row-major; states y, v, I, measured y₋₁, then u₋₁, u₋₂, …. */
interface SampledStates {
  n: number;
  a: Float64Array<ArrayBuffer>;
  b: Float64Array;
  c: Float64Array;
  reaction: number;
}

/** The sampled loop in state space, driven by noise on the measured position. */
function sampledStates(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  outputDelaySamples: number,
): SampledStates {
  const T = sampleTime;
  const late = deadTimeInSamples(plant.deadTime ?? 0, T);
  const delay = outputDelaySamples + late.whole;
  const past = delay + (late.fraction > 0 ? 1 : 0);
  const n = 4 + past;
  const full = zeroOrderHold(plant, T);
  const rest = zeroOrderHold(plant, T * (1 - late.fraction));
  const { kp, ki, kd } = effectiveGains(plant, gains);
  const reaction = kp + ki * T + kd / T;
  const c = new Float64Array(n);
  c[0] = -reaction;
  c[2] = 1;
  c[3] = kd / T;
  const a = new Float64Array(n * n);
  const b = new Float64Array(n);
  a[0] = 1;
  a[1] = full.positionFromVelocity;
  a[n + 1] = full.decay;
  const drive = (age: number, position: number, velocity: number): void => {
    if (age === 0) {
      for (let j = 0; j < n; j++) {
        a[j]! += position * c[j]!;
        a[n + j]! += velocity * c[j]!;
      }
      b[0]! -= position * reaction;
      b[1]! -= velocity * reaction;
    } else {
      a[3 + age]! += position;
      a[n + 3 + age]! += velocity;
    }
  };
  drive(delay, rest.positionFromOutput, rest.velocityFromOutput);
  if (late.fraction > 0)
    drive(
      delay + 1,
      full.positionFromOutput - rest.positionFromOutput,
      full.velocityFromOutput - rest.velocityFromOutput,
    );
  a[2 * n] = -ki * T;
  a[2 * n + 2] = 1;
  b[2] = -ki * T;
  a[3 * n] = 1;
  b[3] = 1;
  if (past > 0) {
    for (let j = 0; j < n; j++) a[4 * n + j] = c[j]!;
    b[4] = -reaction;
    for (let i = 1; i < past; i++) a[(4 + i) * n + 3 + i] = 1;
  }
  return { n, a, b, c, reaction };
}

/** ‖H‖₂ from white position noise to the output, %/mm; null when the loop is not stable. */
function noiseToOutput(
  plant: Plant,
  gains: Gains,
  sampleTime: number,
  outputDelaySamples: number,
): number | null {
  const { n, b, c: u, reaction, a: once } = sampledStates(plant, gains, sampleTime, outputDelaySamples);
  let a = once;
  const x = new Float64Array(n * n);
  for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) x[i * n + j] = b[i]! * b[j]!;
  for (let i = 0; i < 60; i++) {
    const ax = matrixProduct(a, x, n, false);
    const grown = matrixProduct(ax, a, n, true);
    let change = 0;
    let size = 0;
    for (let k = 0; k < x.length; k++) {
      x[k]! += grown[k]!;
      change = Math.max(change, Math.abs(grown[k]!));
      size = Math.max(size, Math.abs(x[k]!));
    }
    if (!Number.isFinite(size)) return null;
    if (change <= 1e-17 * size) {
      let variance = reaction * reaction;
      for (let r = 0; r < n; r++) for (let c = 0; c < n; c++) variance += u[r]! * x[r * n + c]! * u[c]!;
      return Math.sqrt(variance);
    }
    a = matrixProduct(a, a, n, false);
  }
  return null;
}

/** p·q, or p·qᵀ, of square row-major matrices of size n. */
function matrixProduct(
  p: Float64Array,
  q: Float64Array,
  n: number,
  transposed: boolean,
): Float64Array<ArrayBuffer> {
  const result = new Float64Array(n * n);
  for (let i = 0; i < n; i++)
    for (let k = 0; k < n; k++) {
      if (transposed) {
        let s = 0;
        for (let j = 0; j < n; j++) s += p[i * n + j]! * q[k * n + j]!;
        result[i * n + k] = s;
      } else {
        const v = p[i * n + k]!;
        if (v !== 0) for (let j = 0; j < n; j++) result[i * n + j]! += v * q[k * n + j]!;
      }
    }
  return result;
}

/** |z| below which a pole stands for a delay and has no counterpart in s. */
const PURE_DELAY = 1e-9;

export interface SampledLoop {
  /** Eigenvalues in z, by descending magnitude. */
  poles: Complex[];
  /** The same as poles in s, ln(z)/T, rad/s; those at z = 0, pure delay, are left out. */
  equivalentPoles: Complex[];
  /** Largest |z|. */
  spectralRadius: number;
  stable: boolean;
  /** Smallest damping ratio of all poles; see `poleDamping`. */
  damping: number;
  /** s; see `maxStableSampleTime`. */
  maxStableSampleTime: number | null;
  /** %; see `outputRipple`. */
  outputRippleRms: number | null;
}

/**
 * The loop as a controller really runs it: eigenvalues, stability, damping, the largest stable sample time and
 * the output ripple caused by the resolution, with `outputDelaySamples` and the plant's dead time.
 *
 * @throws UnphysicalInputError naming the field
 */
export function sampledLoop(plant: Plant, gains: Gains, controller: Controller): SampledLoop {
  checkPlant(plant);
  checkGains(gains);
  checkController(controller);
  const delay = controller.outputDelaySamples ?? 0;
  const poles = sampledPoles(plant, gains, controller.sampleTime, delay);
  const spectralRadius = Math.max(...poles.map((z) => Math.hypot(z.re, z.im)));
  const stable = spectralRadius < 1;
  return {
    poles,
    equivalentPoles: poles
      .filter((z) => Math.hypot(z.re, z.im) > PURE_DELAY)
      .map((z) => ({
        re: Math.log(Math.hypot(z.re, z.im)) / controller.sampleTime,
        im: Math.atan2(z.im, z.re) / controller.sampleTime,
      })),
    spectralRadius,
    stable,
    damping: Math.min(...poles.map(poleDamping)),
    maxStableSampleTime: maxStableSampleTime(plant, gains, delay),
    outputRippleRms: stable
      ? outputRipple(plant, gains, controller.sampleTime, delay, controller.resolution ?? 0)
      : null,
  };
}
