import type { PlantPrior } from './plant-estimate.js';
import { holdTaps } from './hold-taps.js';
import { PRODUCT_SUMS } from './motion-regression.js';

/**
 * The sample-by-sample part of identification: a delay line, the velocity's sign, six filtered signals and
 * their sums of products, all of it in one Float64Array per axis.
 */

/** Samples that the delay line holds; a power of two. */
const LINE = 64;
const LINE_MASK = LINE - 1;
/** Seconds of motion in one block of sums. */
const BLOCK_SECONDS = 1;
/** Stream seconds after which a block with some motion closes all the same. */
const BLOCK_PATIENCE = 15;
const BLOCK_LEAST_MOTION = 0.3;

/** A block: its sums of products, then these counts. */
export const BLOCK = {
  learned: PRODUCT_SUMS,
  elapsed: PRODUCT_SUMS + 1,
  forward: PRODUCT_SUMS + 2,
  reverse: PRODUCT_SUMS + 3,
  atLimit: PRODUCT_SUMS + 4,
  residualSquare: PRODUCT_SUMS + 5,
  velocity: PRODUCT_SUMS + 6,
  velocitySquare: PRODUCT_SUMS + 7,
  simulated: PRODUCT_SUMS + 8,
  window: PRODUCT_SUMS + 9,
  length: PRODUCT_SUMS + 10,
} as const;

/** Where things stand in the state. */
export const STATE = {
  /** Samples in the delay line since the last gap, capped. */
  filled: 0,
  write: 1,
  /** Samples until the filters have forgotten their start. */
  settling: 2,
  resting: 3,
  phase: 4,
  /** Dead time assumed by the delay line, s. */
  deadTime: 5,
  /** Velocity simulated with the current estimate: v ← a·v + gated (gain·u ∓ friction). */
  simulatedVelocity: 6,
  simA: 7,
  simForward: 8,
  simReverse: 9,
  simFrictionForward: 10,
  simFrictionReverse: 11,
  simReady: 12,
  /** Bookkeeping of blocks and windows, by the identifier. */
  blockCount: 13,
  blockNext: 14,
  windowOpen: 15,
  windowTaken: 16,
  delayShift: 17,
  /** 1 from a window that contradicts the older ones until one agrees with what was kept. */
  unsettled: 18,
  /** Inputs of the interval before, for the hold's weighted mean. */
  previous: 19,
  /** Three stages of each of six signals. */
  filters: 25,
  positions: 43,
  outputs: 43 + LINE,
  block: 43 + 2 * LINE,
  ring: 43 + 2 * LINE + BLOCK.length,
} as const;

/** Constants of an axis's filters, all following from its prior. */
export interface FilterPlan {
  readonly sampleTime: number;
  readonly resolution: number;
  readonly pole: number;
  /** Filter bandwidth, rad/s. */
  readonly bandwidth: number;
  /** Filter step 1 − e^(−ωT). */
  readonly step: number;
  /** Velocity span: samples on each side of the interval, 2·reach − 1 in all. */
  readonly reach: number;
  /** Counts over the span from which on the axis surely moves. */
  readonly movingCounts: number;
  /** Samples after a gap until the filters have forgotten it, and after a start until breakaway is forgotten. */
  readonly settleSamples: number;
  readonly clearSamples: number;
  /** Every how many samples the filtered signals enter the sums. */
  readonly stride: number;
  /** Hold weights of the newer and the older interval. */
  readonly newer: number;
  readonly older: number;
  readonly longestDelay: number;
}

/**
 * Filter bandwidth α, at least 30 rad/s so that production moves pass, at most 0.35/T; span of the velocity's
 * sign a quarter of the plant's time constant, longer where the resolution is coarse; learning from seven
 * filter time constants after the axis has begun to move or turned, when 3 % of what happened then is left in
 * a third-order filter (common practice, no source; chosen on the simulated axes of the tests).
 */
export function filterPlan(prior: PlantPrior): FilterPlan {
  const { sampleTime: T, resolution, pole } = prior;
  const bandwidth = Math.min(Math.max(pole, 30), 0.35 / T);
  const spanSeconds = Math.min(Math.max(0.25 / pole, resolution, 3 * T), 0.04);
  const reach = Math.min(Math.max(Math.round((spanSeconds / T + 1) / 2), 2), 16);
  const [newer, older] = holdTaps(pole, T, 0).weights;
  return {
    sampleTime: T,
    resolution,
    bandwidth,
    step: 1 - Math.exp(-bandwidth * T),
    reach,
    movingCounts: 3,
    settleSamples: Math.ceil(10 / (bandwidth * T)),
    clearSamples: Math.ceil(7 / (bandwidth * T)),
    stride: Math.max(1, Math.floor(0.25 / (bandwidth * T))),
    newer,
    older,
    pole,
    longestDelay: (LINE - 2 * 16 - 4) * T,
  };
}

/** Puts the delay line and the filters at their start; sums stay. */
export function restartFilters(state: Float64Array, plan: FilterPlan): void {
  state[STATE.filled] = 0;
  state[STATE.write] = 0;
  state[STATE.settling] = plan.settleSamples;
  state[STATE.resting] = 0;
  state[STATE.simulatedVelocity] = 0;
  state.fill(0, STATE.previous, STATE.block);
}

/**
 * Takes samples until the open block is full or the chunk ends.
 *
 * @param position counts; @param output 0.01 %.
 * @returns index of the first sample not taken.
 */
export function filterSamples(
  state: Float64Array,
  plan: FilterPlan,
  position: Int32Array,
  output: Int16Array,
  from: number,
  to: number,
): number {
  const T = plan.sampleTime;
  const perSecond = plan.resolution / T;
  const g = plan.step;
  const rate = 1 / T;
  const { newer, older } = plan;
  // `| 0` tells the compiler that counts and indices are integers; as floating-point numbers they cost half as much again.
  const reach = plan.reach | 0;
  const movingCounts = plan.movingCounts | 0;
  const stride = plan.stride | 0;
  const settleSamples = plan.settleSamples | 0;
  const clearSamples = plan.clearSamples | 0;
  const span = (2 * reach - 1) | 0;
  const spanVelocity = plan.resolution / (span * T);
  const delaySamples = state[STATE.deadTime]! / T;
  const d = Math.floor(delaySamples) | 0;
  const taps = holdTaps(plan.pole, T, delaySamples - d);
  const [n1, n2, n3] = taps.weights;
  const [m1, m2, m3] = taps.slopes;
  const need = (Math.max(span, reach + d + 2) + 1) | 0;
  const lineP = STATE.positions;
  const lineU = STATE.outputs;
  const B = STATE.block;
  const blockLearned = Math.ceil(BLOCK_SECONDS / (T * stride)) | 0;

  let filled = state[STATE.filled]! | 0;
  let w = state[STATE.write]! | 0;
  let settling = state[STATE.settling]! | 0;
  let resting = state[STATE.resting]! | 0;
  let phase = state[STATE.phase]! | 0;
  let vSim = state[STATE.simulatedVelocity]!;
  const simReady = state[STATE.simReady]! > 0;
  const simA = state[STATE.simA]!;
  const simF = state[STATE.simForward]!;
  const simR = state[STATE.simReverse]!;
  const simCF = state[STATE.simFrictionForward]!;
  const simCR = state[STATE.simFrictionReverse]!;
  let learned = state[B + BLOCK.learned]! | 0;
  // One column −U̇ for the remaining dead time: each direction's part by its own share of the mean gain.
  const shareF = simReady ? (2 * simF) / (simF + simR) : 1;
  const shareR = 2 - shareF;

  const P = STATE.previous;
  let sf0 = state[P]!;
  let sr0 = state[P + 1]!;
  const F = STATE.filters;
  let v1 = state[F]!;
  let v2 = state[F + 1]!;
  let v3 = state[F + 2]!;
  let a1 = state[F + 3]!;
  let a2 = state[F + 4]!;
  let a3 = state[F + 5]!;
  let b1 = state[F + 6]!;
  let b2 = state[F + 7]!;
  let b3 = state[F + 8]!;
  let c1 = state[F + 9]!;
  let c2 = state[F + 10]!;
  let c3 = state[F + 11]!;
  let e1 = state[F + 12]!;
  let e2 = state[F + 13]!;
  let e3 = state[F + 14]!;
  let h1 = state[F + 15]!;
  let h2 = state[F + 16]!;
  let h3 = state[F + 17]!;

  // What the next sample finds one place further on in the delay line.
  let pBefore = state[lineP + ((w - reach) & LINE_MASK)]!;
  let uOld = state[lineU + ((w - reach - d - 1) & LINE_MASK)]!;
  let uOlder = state[lineU + ((w - reach - d - 2) & LINE_MASK)]!;

  let k = from;
  for (; k < to && learned < blockLearned; k++) {
    const p = position[k]!;
    state[lineP + w] = p;
    state[lineU + w] = output[k]! * 0.01;
    const i = w - reach;
    const counts = p - state[lineP + ((w - span) & LINE_MASK)]!;
    const pHere = state[lineP + ((i + 1) & LINE_MASK)]!;
    const velocity = (pHere - pBefore) * perSecond;
    pBefore = pHere;
    const uNew = state[lineU + ((i - d) & LINE_MASK)]!;
    const u = n1 * uNew + n2 * uOld + n3 * uOlder;
    const slope = m1 * uNew + m2 * uOld + m3 * uOlder;
    uOlder = uOld;
    uOld = uNew;
    w = (w + 1) & LINE_MASK;
    if (filled < need) {
      filled++;
      if (filled < need) continue;
    }

    let uf = 0;
    let ur = 0;
    let sf = 0;
    let sr = 0;
    let du = 0;
    let moving = true;
    if (counts >= movingCounts) {
      uf = u;
      sf = 1;
      du = -shareF * slope;
      vSim = simA * vSim + simF * u - simCF;
    } else if (counts <= -movingCounts) {
      ur = u;
      sr = 1;
      du = -shareR * slope;
      vSim = simA * vSim + simR * u + simCR;
    } else {
      moving = false;
      vSim = 0;
      if (++resting > settleSamples) {
        // After ten filter time constants at rest both sides of the equation are zero, and stay there.
        if (resting === settleSamples + 1) {
          v1 = v2 = v3 = a1 = a2 = a3 = b1 = b2 = b3 = 0;
          c1 = c2 = c3 = e1 = e2 = e3 = h1 = h2 = h3 = 0;
          sf0 = sr0 = 0;
        }
        continue;
      }
    }

    const vBefore = v3;
    v1 += g * (velocity - v1);
    v2 += g * (v1 - v2);
    v3 += g * (v2 - v3);
    a1 += g * (uf - a1);
    a2 += g * (a1 - a2);
    a3 += g * (a2 - a3);
    b1 += g * (ur - b1);
    b2 += g * (b1 - b2);
    b3 += g * (b2 - b3);
    c1 += g * (newer * sf + older * sf0 - c1);
    c2 += g * (c1 - c2);
    c3 += g * (c2 - c3);
    e1 += g * (newer * sr + older * sr0 - e1);
    e2 += g * (e1 - e2);
    e3 += g * (e2 - e3);
    // A reversal happens inside an interval, where neither direction's gain and friction hold.
    if (sf * sr0 + sr * sf0 > 0 && settling < clearSamples) settling = clearSamples;
    h1 += g * (du - h1);
    h2 += g * (h1 - h2);
    h3 += g * (h2 - h3);
    sf0 = sf;
    sr0 = sr;

    if (!moving) {
      if (resting === settleSamples) settling = 0;
      if (settling > 0) settling--;
      continue;
    }
    if (resting > 0) {
      resting = 0;
      if (settling < clearSamples) settling = clearSamples;
    }
    if (settling > 0) {
      settling--;
      continue;
    }
    if (++phase < stride) continue;
    phase = 0;
    learned++;
    const D = (v3 - vBefore) * rate;
    addProducts(state, B, vBefore, a3, b3, c3, e3, h3, D);
    state[B + BLOCK.forward]! += sf;
    state[B + BLOCK.reverse]! += sr;
    if (u >= 99.99 || u <= -99.99) state[B + BLOCK.atLimit]! += 1;
    if (simReady) {
      const v = counts * spanVelocity;
      const miss = v - vSim;
      state[B + BLOCK.residualSquare]! += miss * miss;
      state[B + BLOCK.velocity]! += v;
      state[B + BLOCK.velocitySquare]! += v * v;
      state[B + BLOCK.simulated]! += 1;
    }
  }

  state[STATE.filled] = filled;
  state[STATE.write] = w;
  state[STATE.settling] = settling;
  state[STATE.resting] = resting;
  state[STATE.phase] = phase;
  state[STATE.simulatedVelocity] = vSim;
  state[B + BLOCK.learned] = learned;
  state[B + BLOCK.elapsed]! += k - from;
  state[P] = sf0;
  state[P + 1] = sr0;
  state[F] = v1;
  state[F + 1] = v2;
  state[F + 2] = v3;
  state[F + 3] = a1;
  state[F + 4] = a2;
  state[F + 5] = a3;
  state[F + 6] = b1;
  state[F + 7] = b2;
  state[F + 8] = b3;
  state[F + 9] = c1;
  state[F + 10] = c2;
  state[F + 11] = c3;
  state[F + 12] = e1;
  state[F + 13] = e2;
  state[F + 14] = e3;
  state[F + 15] = h1;
  state[F + 16] = h2;
  state[F + 17] = h3;
  return k;
}

/**
 * Products of the regressors (−V, U⁺, U⁻, −S⁺, S⁻, −U̇) and the target D, added to packed sums. A function of its own so
 * that the loop above stays small enough to be compiled early.
 */
function addProducts(
  sums: Float64Array,
  from: number,
  v: number,
  a: number,
  b: number,
  c: number,
  e: number,
  h: number,
  D: number,
): void {
  sums[from]! += v * v;
  sums[from + 1]! -= v * a;
  sums[from + 2]! -= v * b;
  sums[from + 3]! += v * c;
  sums[from + 4]! -= v * e;
  sums[from + 5]! += v * h;
  sums[from + 6]! -= v * D;
  sums[from + 7]! += a * a;
  sums[from + 8]! += a * b;
  sums[from + 9]! -= a * c;
  sums[from + 10]! += a * e;
  sums[from + 11]! -= a * h;
  sums[from + 12]! += a * D;
  sums[from + 13]! += b * b;
  sums[from + 14]! -= b * c;
  sums[from + 15]! += b * e;
  sums[from + 16]! -= b * h;
  sums[from + 17]! += b * D;
  sums[from + 18]! += c * c;
  sums[from + 19]! -= c * e;
  sums[from + 20]! += c * h;
  sums[from + 21]! -= c * D;
  sums[from + 22]! += e * e;
  sums[from + 23]! -= e * h;
  sums[from + 24]! += e * D;
  sums[from + 25]! += h * h;
  sums[from + 26]! -= h * D;
  sums[from + 27]! += D * D;
}

/** Whether the open block has enough to close: full, or old with some motion in it. */
export function blockIsDue(state: Float64Array, plan: FilterPlan): boolean {
  const T = plan.sampleTime;
  const motion = state[STATE.block + BLOCK.learned]! * plan.stride * T;
  if (motion >= BLOCK_SECONDS) return true;
  return motion >= BLOCK_LEAST_MOTION && state[STATE.block + BLOCK.elapsed]! * T >= BLOCK_PATIENCE;
}
