import { invertPositive, multiply, packedIndex } from './symmetric.js';

/**
 * The regression that identification rests on.
 *
 * Plant: v' = −αv + K±·α·(u(t−τ) − b − f·sgn v), K⁺ forward and K⁻ reverse. Sampled exactly for an output
 * that the hold keeps constant over T (zero-order hold), with V the velocity averaged over one sample:
 *
 *   (V(i) − V(i−1))/T = −α̃·V(i−1) + β±·ū±(i) − c⁺·s⁺(i) + c⁻·s⁻(i),   α̃ = (1 − e^(−αT))/T, β = Kα̃,
 *   c⁺ = β⁺(f + b), c⁻ = β⁻(f − b),
 *
 * where the bar is the hold's own weighted mean of two neighbouring intervals. Every signal passes the same
 * low-pass, which leaves the equation exact and takes the position noise out of the second difference:
 * state-variable filters (Young 1981; Garnier & Wang, Identification of Continuous-time Models from Sampled
 * Data, 2008; both from memory). An output that acts Δτ later than assumed adds −β·Δτ·u̇.
 *
 * Full parameter vector: (α̃, β⁺, β⁻, c⁺, c⁻, β·Δτ), regressors (−V, U⁺, U⁻, −S⁺, S⁻, −U̇), target D.
 */
export const FULL_PARAMETERS = 6;
const COLUMNS = FULL_PARAMETERS + 1;
/** Sums of products of six regressors and the target, packed upper triangle. */
export const PRODUCT_SUMS = (COLUMNS * (COLUMNS + 1)) / 2;

/** Which parameters are free. */
export interface MotionModel {
  readonly parameters: number;
  /** FULL_PARAMETERS × parameters, row-major: full = map · free. */
  readonly map: Float64Array;
  readonly directional: boolean;
  readonly forward: boolean;
  readonly reverse: boolean;
  /** Index of the free βΔτ, or −1 when Δτ is held. */
  readonly delayIndex: number;
  readonly heldDelay: number;
}

/**
 * Builds the map from free to full parameters.
 *
 * @param forward, reverse whether the data hold motion in that direction (at least one must).
 * @param directional K⁺ and K⁻ apart; needs both directions.
 * @param heldDelay Δτ in s to hold, or null to estimate βΔτ.
 */
export function motionModel(
  forward: boolean,
  reverse: boolean,
  directional: boolean,
  heldDelay: number | null,
): MotionModel {
  const both = forward && reverse;
  const split = directional && both;
  let p = 1;
  const betaForward = p++;
  const betaReverse = split ? p++ : betaForward;
  const cForward = forward ? p++ : -1;
  const cReverse = reverse ? p++ : -1;
  const delayIndex = heldDelay === null ? p++ : -1;
  const map = new Float64Array(FULL_PARAMETERS * p);
  map[0] = 1;
  map[p + betaForward] = 1;
  map[2 * p + betaReverse] = 1;
  if (cForward >= 0) map[3 * p + cForward] = 1;
  if (cReverse >= 0) map[4 * p + cReverse] = 1;
  if (heldDelay === null) {
    map[5 * p + delayIndex] = 1;
  } else {
    map[5 * p + betaForward]! += heldDelay / 2;
    map[5 * p + betaReverse]! += heldDelay / 2;
  }
  return { parameters: p, map, directional: split, forward, reverse, delayIndex, heldDelay: heldDelay ?? 0 };
}

/** Normal equations of a model: mᵀ·A·m (p×p) and mᵀ·r from packed sums that start at `offset`. */
export function normalEquations(
  { parameters: p, map }: Pick<MotionModel, 'parameters' | 'map'>,
  sums: Float64Array,
  offset: number,
): { matrix: Float64Array; vector: Float64Array } {
  const half = new Float64Array(FULL_PARAMETERS * p);
  const vector = new Float64Array(p);
  for (let i = 0; i < FULL_PARAMETERS; i++) {
    for (let j = 0; j < FULL_PARAMETERS; j++) {
      const a = sums[offset + (i <= j ? packedIndex(COLUMNS, i, j) : packedIndex(COLUMNS, j, i))]!;
      for (let c = 0; c < p; c++) half[i * p + c]! += a * map[j * p + c]!;
    }
    const r = sums[offset + packedIndex(COLUMNS, i, FULL_PARAMETERS)]!;
    for (let c = 0; c < p; c++) vector[c]! += r * map[i * p + c]!;
  }
  const matrix = new Float64Array(p * p);
  for (let i = 0; i < FULL_PARAMETERS; i++)
    for (let r = 0; r < p; r++) {
      const m = map[i * p + r]!;
      if (m === 0) continue;
      for (let c = 0; c < p; c++) matrix[r * p + c]! += m * half[i * p + c]!;
    }
  return { matrix, vector };
}

/** Least squares over weighted blocks with the covariance of its estimate. */
export interface BlockFit {
  readonly model: MotionModel;
  readonly theta: Float64Array;
  readonly covariance: Float64Array;
  /** Number of blocks of equal weight that carry the same information. */
  readonly effectiveBlocks: number;
  /** How many times the covariance exceeds that of white residuals of the same size. */
  readonly inflation: number;
}

/** Blocks whose pooled score spread counts beside each block's own, in units of blocks. */
const POOLED_SCORE_BLOCKS = 12;

/**
 * Weighted least squares over blocks, θ = A⁻¹Σ w r, with the sandwich covariance A⁻¹GA⁻¹,
 * G = Σ w²·g·gᵀ from the scores g = r_b − A_b·θ of whole blocks (batch means): autocorrelation inside a
 * block is taken as it comes. Few blocks make G noisy, so it is shrunk toward s²·Σ w²A_b, whose one factor s²
 * averages over all parameters. (Huber 1967, White 1980, for the sandwich; the shrinkage is common practice,
 * no source.)
 *
 * @param sums packed sums of the blocks, each from its offset on.
 * @param mapOf a block's own map from free to full parameters; the model's where not given.
 * @returns null when the regressors cannot be told apart.
 */
export function fitBlocks(
  model: MotionModel,
  sums: Float64Array,
  offsets: readonly number[],
  weights: readonly number[],
  mapOf?: (block: number) => Float64Array,
): BlockFit | null {
  const p = model.parameters;
  const a = new Float64Array(p * p);
  const a2 = new Float64Array(p * p);
  const r = new Float64Array(p);
  const parts: { matrix: Float64Array; vector: Float64Array }[] = [];
  let wSum = 0;
  let w2Sum = 0;
  for (let b = 0; b < offsets.length; b++) {
    const map = mapOf ? mapOf(b) : model.map;
    const part = normalEquations({ parameters: p, map }, sums, offsets[b]!);
    parts.push(part);
    const w = weights[b]!;
    wSum += w;
    w2Sum += w * w;
    for (let i = 0; i < p * p; i++) {
      a[i]! += w * part.matrix[i]!;
      a2[i]! += w * w * part.matrix[i]!;
    }
    for (let i = 0; i < p; i++) r[i]! += w * part.vector[i]!;
  }
  const inverse = invertPositive(a, p);
  const inverse2 = invertPositive(a2, p);
  if (!inverse || !inverse2) return null;
  const theta = new Float64Array(p);
  for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) theta[i]! += inverse[i * p + j]! * r[j]!;

  const g = new Float64Array(p * p);
  const score = new Float64Array(p);
  for (let b = 0; b < parts.length; b++) {
    const { matrix, vector } = parts[b]!;
    const w = weights[b]!;
    for (let i = 0; i < p; i++) {
      let s = vector[i]!;
      for (let j = 0; j < p; j++) s -= matrix[i * p + j]! * theta[j]!;
      score[i] = w * s;
    }
    for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) g[i * p + j]! += score[i]! * score[j]!;
  }
  const effectiveBlocks = (wSum * wSum) / w2Sum;
  const correction = effectiveBlocks / Math.max(effectiveBlocks - p, effectiveBlocks / 2);
  let trace = 0;
  for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) trace += inverse2[i * p + j]! * g[j * p + i]!;
  const spread = (trace / p) * correction;
  const total = effectiveBlocks + POOLED_SCORE_BLOCKS;
  for (let i = 0; i < p * p; i++)
    g[i] = (effectiveBlocks * correction * g[i]! + POOLED_SCORE_BLOCKS * spread * a2[i]!) / total;
  const covariance = multiply(multiply(inverse, g, p), inverse, p);
  return { model, theta, covariance, effectiveBlocks, inflation: spread };
}

/** The plant of a fit, with the gradients that carry the covariance of θ to each figure. */
export interface PlantFigures {
  readonly lnGain: number;
  readonly lnPole: number;
  readonly gainForward: number;
  readonly gainReverse: number;
  readonly coulomb: number;
  readonly bias: number;
  readonly delayShift: number;
  readonly gradients: {
    readonly lnGain: Float64Array;
    readonly lnPole: Float64Array;
    readonly lnForward: Float64Array;
    readonly lnReverse: Float64Array;
    readonly coulomb: Float64Array;
    readonly bias: Float64Array;
    readonly delayShift: Float64Array;
  };
}

/**
 * From θ to K, α, f, b, Δτ: α = −ln(1 − α̃T)/T, K = β/α̃, f ± b = c±/β±. Where the directions have gains of
 * their own, K is their mean. With one direction of travel only, f stands for f ± b and b for 0.
 *
 * @returns null when θ is no plant (α̃ ≤ 0, α̃T ≥ 1 or a gain ≤ 0).
 */
export function plantFigures(fit: BlockFit, sampleTime: number): PlantFigures | null {
  const { model, theta } = fit;
  const p = model.parameters;
  const full = (row: number): number => {
    let s = 0;
    for (let j = 0; j < p; j++) s += model.map[row * p + j]! * theta[j]!;
    return s;
  };
  const rowGradient = (row: number): Float64Array => model.map.slice(row * p, row * p + p);
  const combine = (...terms: [number, Float64Array][]): Float64Array => {
    const g = new Float64Array(p);
    for (const [f, v] of terms) for (let i = 0; i < p; i++) g[i]! += f * v[i]!;
    return g;
  };
  const alphaT = full(0);
  const betaF = full(1);
  const betaR = full(2);
  if (!(alphaT > 0) || !(alphaT * sampleTime < 1) || !(betaF > 0) || !(betaR > 0)) return null;
  const pole = -Math.log(1 - alphaT * sampleTime) / sampleTime;
  const gAlpha = rowGradient(0);
  const gF = rowGradient(1);
  const gR = rowGradient(2);
  const lnForward = combine([1 / betaF, gF], [-1 / alphaT, gAlpha]);
  const lnReverse = combine([1 / betaR, gR], [-1 / alphaT, gAlpha]);
  const gainForward = betaF / alphaT;
  const gainReverse = betaR / alphaT;
  const gain = (gainForward + gainReverse) / 2;
  const lnGain = combine([gainForward / (2 * gain), lnForward], [gainReverse / (2 * gain), lnReverse]);
  const lnPole = combine([1 / ((1 - alphaT * sampleTime) * pole), gAlpha]);

  const resistF = model.forward ? full(3) / betaF : 0;
  const resistR = model.reverse ? full(4) / betaR : 0;
  const gResistF = model.forward
    ? combine([1 / betaF, rowGradient(3)], [-resistF / betaF, gF])
    : new Float64Array(p);
  const gResistR = model.reverse
    ? combine([1 / betaR, rowGradient(4)], [-resistR / betaR, gR])
    : new Float64Array(p);
  const both = model.forward && model.reverse;
  const half = both ? 0.5 : 1;
  const coulomb = half * (resistF + resistR);
  const bias = both ? 0.5 * (resistF - resistR) : 0;

  const beta = (betaF + betaR) / 2;
  let delayShift = model.heldDelay;
  let gDelay = new Float64Array(p);
  if (model.delayIndex >= 0) {
    delayShift = full(5) / beta;
    gDelay = new Float64Array(
      combine([1 / beta, rowGradient(5)], [-delayShift / (2 * beta), gF], [-delayShift / (2 * beta), gR]),
    );
  }
  return {
    lnGain: Math.log(gain),
    lnPole: Math.log(pole),
    gainForward,
    gainReverse,
    coulomb,
    bias,
    delayShift,
    gradients: {
      lnGain,
      lnPole,
      lnForward,
      lnReverse,
      coulomb: combine([half, gResistF], [half, gResistR]),
      bias: both ? combine([0.5, gResistF], [-0.5, gResistR]) : new Float64Array(p),
      delayShift: gDelay,
    },
  };
}
