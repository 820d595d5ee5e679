import { invertPositive, multiply, packedIndex, solvePositive } from './symmetric.js';

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

/** Place of (row, column) in the packed sums, for both orders. */
const PLACE = Int32Array.from({ length: COLUMNS * COLUMNS }, (_, at) => {
  const row = Math.floor(at / COLUMNS);
  const column = at % COLUMNS;
  return packedIndex(COLUMNS, Math.min(row, column), Math.max(row, column));
});

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
  if (heldDelay) return buildModel(forward, reverse, directional, heldDelay);
  const key =
    Number(forward) + 2 * Number(reverse) + 4 * Number(directional) + 8 * Number(heldDelay === null);
  return (KNOWN_MODELS[key] ??= buildModel(forward, reverse, directional, heldDelay));
}

/** Share of samples a direction needs to count as present. */
const DIRECTION_SHARE = 0.08;

/** The model for samples of which so many go forward and in reverse; a direction with too few counts as absent. */
export function modelFor(
  forward: number,
  reverse: number,
  samples: number,
  directional: boolean,
  heldDelay: number | null,
): MotionModel {
  return motionModel(
    forward >= DIRECTION_SHARE * samples,
    reverse >= DIRECTION_SHARE * samples,
    directional,
    heldDelay,
  );
}

/** The models without a held delay of their own, by what sets them apart. */
const KNOWN_MODELS: MotionModel[] = [];

function buildModel(
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

/** mᵀ·A of one block on its way to mᵀ·A·m. */
let half = new Float64Array(FULL_PARAMETERS * 8);

/**
 * Adds weight·mᵀ·A·m (p×p) to `matrix` and weight·mᵀ·r to `vector`, from packed sums that start at `offset`.
 */
export function addNormalEquations(
  { parameters: p, map }: Pick<MotionModel, 'parameters' | 'map'>,
  sums: Float64Array,
  offset: number,
  weight: number,
  matrix: Float64Array,
  vector: Float64Array,
): void {
  if (half.length < FULL_PARAMETERS * p) half = new Float64Array(FULL_PARAMETERS * p);
  half.fill(0);
  // Most entries of a map are zero.
  for (let j = 0; j < FULL_PARAMETERS; j++)
    for (let c = 0; c < p; c++) {
      const m = weight * map[j * p + c]!;
      if (m === 0) continue;
      for (let i = 0; i < FULL_PARAMETERS; i++)
        half[i * p + c]! += m * sums[offset + PLACE[i * COLUMNS + j]!]!;
      vector[c]! += m * sums[offset + PLACE[j * COLUMNS + FULL_PARAMETERS]!]!;
    }
  for (let i = 0; i < FULL_PARAMETERS; i++)
    for (let c = 0; c < p; c++) {
      const m = map[i * p + c]!;
      if (m === 0) continue;
      for (let d = 0; d < p; d++) matrix[c * p + d]! += m * half[i * p + d]!;
    }
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

/** Room for the matrices of one fit at a time: typed arrays of this size cost more to allocate than to fill. */
let room = roomFor(8);

function roomFor(parameters: number) {
  const square = (): Float64Array => new Float64Array(parameters * parameters);
  return {
    parameters,
    a: square(),
    a2: square(),
    inverse: square(),
    inverse2: square(),
    scores: square(),
    product: square(),
    r: new Float64Array(parameters),
    r2: new Float64Array(parameters),
    score: new Float64Array(parameters),
  };
}

const total = new Float64Array(PRODUCT_SUMS);
const total2 = new Float64Array(PRODUCT_SUMS);
const full = new Float64Array(FULL_PARAMETERS);
const left = new Float64Array(FULL_PARAMETERS);

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
  weights: ArrayLike<number>,
  mapOf?: (block: number) => Float64Array,
): BlockFit | null {
  const p = model.parameters;
  if (p > room.parameters) room = roomFor(p);
  const { a, a2, r, r2, scores, product, score } = room;
  const maps = mapOf && offsets.map((_, b) => mapOf(b));
  a.fill(0);
  a2.fill(0);
  r.fill(0);
  if (maps) {
    for (let b = 0; b < offsets.length; b++) {
      const own = { parameters: p, map: maps[b]! };
      const w = weights[b]!;
      addNormalEquations(own, sums, offsets[b]!, w, a, r);
      addNormalEquations(own, sums, offsets[b]!, w * w, a2, r2);
    }
  } else {
    // One map for all blocks: add the sums first, map once.
    addNormalEquations(model, weightedTotal(sums, offsets, weights, 1, total), 0, 1, a, r);
    addNormalEquations(model, weightedTotal(sums, offsets, weights, 2, total2), 0, 1, a2, r2);
  }
  const inverse = invertPositive(a, p, room.inverse);
  const inverse2 = invertPositive(a2, p, room.inverse2);
  if (!inverse || !inverse2) return null;
  const theta = new Float64Array(p);
  for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) theta[i]! += inverse[i * p + j]! * r[j]!;

  scores.fill(0);
  let wSum = 0;
  let w2Sum = 0;
  for (let b = 0; b < offsets.length; b++) {
    const w = weights[b]!;
    wSum += w;
    w2Sum += w * w;
    const map = maps ? maps[b]! : model.map;
    if (b === 0 || maps)
      for (let i = 0; i < FULL_PARAMETERS; i++) {
        let s = 0;
        for (let c = 0; c < p; c++) s += map[i * p + c]! * theta[c]!;
        full[i] = s;
      }
    // r_b − A_b·θ from the packed upper triangle, whose last column is the target's.
    left.fill(0);
    let n = offsets[b]!;
    for (let i = 0; i < FULL_PARAMETERS; i++) {
      const own = full[i]!;
      let s = left[i]! - sums[n++]! * own;
      for (let j = i + 1; j < FULL_PARAMETERS; j++) {
        const x = sums[n++]!;
        s -= x * full[j]!;
        left[j]! -= x * own;
      }
      left[i] = s + sums[n++]!;
    }
    for (let c = 0; c < p; c++) {
      let s = 0;
      for (let i = 0; i < FULL_PARAMETERS; i++) s += map[i * p + c]! * left[i]!;
      score[c] = w * s;
    }
    for (let i = 0; i < p; i++) {
      const si = score[i]!;
      for (let j = 0; j < p; j++) scores[i * p + j]! += si * score[j]!;
    }
  }
  const effectiveBlocks = (wSum * wSum) / w2Sum;
  const correction = effectiveBlocks / Math.max(effectiveBlocks - p, effectiveBlocks / 2);
  let trace = 0;
  for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) trace += inverse2[i * p + j]! * scores[j * p + i]!;
  const spread = (trace / p) * correction;
  const parts = effectiveBlocks + POOLED_SCORE_BLOCKS;
  for (let i = 0; i < p * p; i++)
    scores[i] = (effectiveBlocks * correction * scores[i]! + POOLED_SCORE_BLOCKS * spread * a2[i]!) / parts;
  const covariance = multiply(multiply(inverse, scores, p, product), inverse, p);
  return { model, theta, covariance, effectiveBlocks, inflation: spread };
}

/** Σ w·sums of blocks (`power` 1) or Σ w²·sums (`power` 2), into `into`. */
export function weightedTotal(
  sums: Float64Array,
  offsets: readonly number[],
  weights: ArrayLike<number>,
  power: 1 | 2,
  into: Float64Array,
): Float64Array {
  into.fill(0);
  for (let b = 0; b < offsets.length; b++) {
    const w = power === 1 ? weights[b]! : weights[b]! * weights[b]!;
    const from = offsets[b]!;
    for (let i = 0; i < PRODUCT_SUMS; i++) into[i]! += w * sums[from + i]!;
  }
  return into;
}

/**
 * θ of least squares over a total of sums, without its covariance.
 *
 * @param sums packed sums of products; @returns null when the regressors cannot be told apart.
 */
export function solveSums(model: MotionModel, sums: Float64Array, offset: number): Float64Array | null {
  const { a, r } = room;
  a.fill(0);
  r.fill(0);
  addNormalEquations(model, sums, offset, 1, a, r);
  return solvePositive(a, r, model.parameters);
}
