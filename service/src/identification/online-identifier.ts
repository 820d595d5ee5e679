import {
  BLOCK,
  STATE,
  blockIsDue,
  filterPlan,
  filterSamples,
  restartFilters,
  type FilterPlan,
} from './motion-filter.js';
import { fitBlocks, motionModel, solveSums, weightedTotal, type MotionModel } from './motion-regression.js';
import { plantFigures, plantValues, type PlantValues } from './plant-figures.js';
import type { PlantEstimate, PlantPrior, WindowEstimate } from './plant-estimate.js';
import {
  covarianceOf,
  describePlant,
  directionsDiffer,
  directionsMayDiffer,
  lnCovariance,
  type PooledFit,
} from './describe-plant.js';

/** Blocks that the state remembers. */
const RING = 48;
/** Weight of a block against the next newer one: 0.96 a second of motion, a memory of about 25 s. */
const FORGETTING = 0.96;
/** Motion that closes a window, s. */
const WINDOW_MOTION = 3;
/** Stream time after which a window with `WINDOW_LEAST_MOTION` closes, s. */
const WINDOW_PATIENCE = 30;
const WINDOW_LEAST_MOTION = 1.5;
/** Share of samples a direction needs to count as present. */
const DIRECTION_SHARE = 0.08;
/**
 * Cuts at which a change is looked for, in blocks from the newest: all of the newest window's, and one in every window
 * before, since a window closes about every three blocks.
 */
const CUTS = [2, 3, 4, 5, 8, 11, 14] as const;
/** Blocks left out before a cut: the one in which the plant changed fits neither side, a ramp takes longer. */
const SKIPPED = [1, 6] as const;
/** Blocks that a side of a cut needs. */
const LEAST_SIDE = 2;
/** Squared standard errors from which a difference is a change; large, because a dozen cuts are tried. */
const CHANGED = 36;
/** Blocks that must agree among themselves before older ones are dropped as a mixture. */
const NEWEST = 5;
/** How many times the spread of all blocks exceeds that of the newest in a mixture; 0.3 … 12 seen without, above 10⁴ with. */
const MIXED = 200;
/** What fits of one unchanged plant may differ by beside their own errors (common practice, no source). */
const MODEL_ERROR = { lnGain: 0.01, lnPole: 0.02, coulomb: 0.08, bias: 0.08 } as const;
/**
 * The start of motion and the velocity's sign are known to a fraction of a sample only: standard deviations of ln K,
 * ln α and of f and b in % of output (measured on simulated axes with noise near zero).
 */
const METHOD_VARIANCE = { lnGain: 1e-4 ** 2, lnPole: 2e-4 ** 2, friction: 1.5e-3 ** 2 };
/** Motion needed before the dead time is moved, s. */
const DELAY_MOTION = 6;

/**
 * Plant identification from a stream of samples, with constant memory.
 *
 * All that it knows is in `state`; a copy of it put back into an identifier of the same prior continues to
 * the last bit.
 */
export class OnlineIdentifier {
  readonly state: Float64Array;
  private readonly plan: FilterPlan;

  constructor(private readonly prior: PlantPrior) {
    this.plan = filterPlan(prior);
    this.state = new Float64Array(STATE.ring + RING * BLOCK.length);
    this.reset();
  }

  /** Forgets everything. */
  reset(): void {
    this.state.fill(0);
    this.state[STATE.deadTime] = Math.min(this.prior.deadTime ?? 0, this.plan.longestDelay);
    restartFilters(this.state, this.plan);
  }

  /** The stream has a hole: filters start anew, what was learned stays. */
  gap(): void {
    restartFilters(this.state, this.plan);
  }

  /**
   * Takes samples `from` … `to` − 1.
   *
   * @param position counts of the resolution; @param output 0.01 %.
   */
  push(position: Int32Array, output: Int16Array, from: number, to: number): void {
    let k = from;
    while (k < to) {
      k = filterSamples(this.state, this.plan, position, output, k, to);
      if (blockIsDue(this.state, this.plan)) this.closeBlock();
    }
  }

  /** The oldest closed window not yet taken; null when there is none or it says nothing about K and α. */
  takeWindow(): WindowEstimate | null {
    const { state } = this;
    while (state[STATE.windowTaken]! < state[STATE.windowOpen]!) {
      const id = state[STATE.windowTaken]!;
      state[STATE.windowTaken] = id + 1;
      const offsets = this.blockOffsets().filter((o) => state[o + BLOCK.window] === id);
      const window = offsets.length > 0 ? this.windowEstimate(offsets) : null;
      if (window) return window;
    }
    return null;
  }

  /** Pooled estimate over the remembered blocks; null before two blocks have closed. */
  estimate(): PlantEstimate | null {
    if (this.state[STATE.blockCount]! < 2) return null;
    return describePlant(
      this.pooled(),
      this.prior,
      this.state[STATE.deadTime]! + this.state[STATE.delayShift]!,
      this.movingSeconds(this.blockOffsets()),
      this.state[STATE.unsettled] === 1,
    );
  }

  private movingSeconds(offsets: readonly number[]): number {
    let n = 0;
    for (const o of offsets) n += this.state[o + BLOCK.learned]!;
    return n * this.plan.stride * this.plan.sampleTime;
  }

  /** Offsets of the remembered blocks, oldest first. */
  private blockOffsets(): number[] {
    const count = this.state[STATE.blockCount]!;
    const next = this.state[STATE.blockNext]!;
    const offsets: number[] = [];
    for (let i = count; i >= 1; i--) offsets.push(STATE.ring + ((next - i + 2 * RING) % RING) * BLOCK.length);
    return offsets;
  }

  private sum(offsets: readonly number[], field: number): number {
    let s = 0;
    for (const o of offsets) s += this.state[o + field]!;
    return s;
  }

  private fit(
    offsets: readonly number[],
    weights: readonly number[],
    directional: boolean,
    held: number | null,
  ) {
    const fit = fitBlocks(this.modelOf(offsets, directional, held), this.state, offsets, weights);
    const figures = fit && plantFigures(fit, this.plan.sampleTime);
    return fit && figures ? { fit, figures } : null;
  }

  private modelOf(offsets: readonly number[], directional: boolean, held: number | null): MotionModel {
    const learned = this.sum(offsets, BLOCK.learned);
    return motionModel(
      this.sum(offsets, BLOCK.forward) >= DIRECTION_SHARE * learned,
      this.sum(offsets, BLOCK.reverse) >= DIRECTION_SHARE * learned,
      directional,
      held,
    );
  }

  /** The plant by direction, without its covariance. */
  private valuesOf(offsets: readonly number[], weights: readonly number[]): PlantValues | null {
    const model = this.modelOf(offsets, true, null);
    const theta = solveSums(model, weightedTotal(this.state, offsets, weights), 0);
    return theta && plantValues(model, theta, this.plan.sampleTime);
  }

  private pooled(): PooledFit | null {
    const offsets = this.blockOffsets();
    const weights = offsets.map((_, i) => FORGETTING ** (offsets.length - 1 - i));
    // A covariance costs most: the split is fitted in full only where its gains differ at all.
    const values = this.valuesOf(offsets, weights);
    const split = values && directionsMayDiffer(values) ? this.fit(offsets, weights, true, null) : null;
    const chosen =
      split?.fit.model.directional && directionsDiffer(split.fit, split.figures)
        ? split
        : this.fit(offsets, weights, false, null);
    if (!chosen) return null;
    const n = this.sum(offsets, BLOCK.simulated);
    const mean = this.sum(offsets, BLOCK.velocity) / Math.max(n, 1);
    const spread = this.sum(offsets, BLOCK.velocitySquare) - n * mean * mean;
    const learned = this.sum(offsets, BLOCK.learned);
    return {
      ...chosen,
      method: METHOD_VARIANCE,
      movingSeconds: this.movingSeconds(offsets),
      atLimitShare: this.sum(offsets, BLOCK.atLimit) / learned,
      forwardShare: this.sum(offsets, BLOCK.forward) / learned,
      fitPct:
        n > 0 && spread > 0 ? 100 * (1 - Math.sqrt(this.sum(offsets, BLOCK.residualSquare) / spread)) : NaN,
    };
  }

  private windowEstimate(offsets: readonly number[]): WindowEstimate | null {
    const { state } = this;
    const shift = state[STATE.delayShift]!;
    const weights = offsets.map(() => 1);
    const single = this.fit(offsets, weights, false, shift);
    const split = this.fit(offsets, weights, true, shift);
    const directional = split?.fit.model.directional ? split : null;
    const chosen =
      directional && directionsDiffer(directional.fit, directional.figures) ? directional : single;
    if (!chosen) return null;
    const { fit, figures } = chosen;
    return {
      movingSeconds: this.movingSeconds(offsets),
      elapsedSeconds: this.sum(offsets, BLOCK.elapsed) * this.plan.sampleTime,
      lnGain: figures.lnGain,
      lnPole: figures.lnPole,
      covariance: lnCovariance(fit, figures, METHOD_VARIANCE),
      coulomb: figures.coulomb,
      bias: figures.bias,
      gainForward: directional ? directional.figures.gainForward : null,
      gainReverse: directional ? directional.figures.gainReverse : null,
      outputLimitShare: this.sum(offsets, BLOCK.atLimit) / this.sum(offsets, BLOCK.learned),
    };
  }

  private closeBlock(): void {
    const { state, plan } = this;
    const open = state[STATE.windowOpen]!;
    const at = state[STATE.blockNext]!;
    const offset = STATE.ring + at * BLOCK.length;
    state.copyWithin(offset, STATE.block, STATE.block + BLOCK.length);
    state[offset + BLOCK.window] = open;
    state.fill(0, STATE.block, STATE.block + BLOCK.length);
    state[STATE.blockNext] = (at + 1) % RING;
    state[STATE.blockCount] = Math.min(state[STATE.blockCount]! + 1, RING);

    const window = this.blockOffsets().filter((o) => state[o + BLOCK.window] === open);
    const motion = this.movingSeconds(window);
    const elapsed = this.sum(window, BLOCK.elapsed) * plan.sampleTime;
    const closes = motion >= WINDOW_MOTION || (elapsed >= WINDOW_PATIENCE && motion >= WINDOW_LEAST_MOTION);
    // Between windows the estimate hardly moves; until there is one, every block may bring it.
    if (!closes && state[STATE.simReady] !== 0) return;
    let pooled = this.pooled();
    if (closes) {
      state[STATE.windowOpen] = open + 1;
      if (this.forgetWhatChanged(pooled)) pooled = this.pooled();
    }
    if (pooled) this.refresh(pooled);
  }

  /** Puts the pooled estimate to use: velocity simulation, held delay, and the delay line's dead time. */
  private refresh({ fit, figures, movingSeconds }: PooledFit): void {
    const { state, plan } = this;
    const T = plan.sampleTime;
    const shift = figures.delayShift;
    const se = Math.sqrt(covarianceOf(fit, figures.gradients.delayShift, figures.gradients.delayShift));
    const moved = Math.min(Math.max(state[STATE.deadTime]! + shift, 0), plan.longestDelay);
    if (
      movingSeconds >= DELAY_MOTION &&
      Math.abs(moved - state[STATE.deadTime]!) > Math.max(0.4 * T, 4 * se)
    ) {
      // Sums of the old dead time do not fit the new one: start over with it.
      state[STATE.deadTime] = moved;
      state[STATE.delayShift] = 0;
      state[STATE.blockCount] = 0;
      restartFilters(state, plan);
      return;
    }
    // More than a sample is no remainder but a pool that does not fit together.
    state[STATE.delayShift] = Math.min(Math.max(shift, -T), T);
    const alpha = Math.exp(figures.lnPole);
    const a = Math.exp(-alpha * T);
    state[STATE.simA] = a;
    state[STATE.simForward] = figures.gainForward * (1 - a);
    state[STATE.simReverse] = figures.gainReverse * (1 - a);
    state[STATE.simFrictionForward] = figures.gainForward * (1 - a) * (figures.coulomb + figures.bias);
    state[STATE.simFrictionReverse] = figures.gainReverse * (1 - a) * (figures.coulomb - figures.bias);
    state[STATE.simReady] = 1;
  }

  /**
   * Looks for the newest change of the plant: over the cuts of `CUTS` that leave at least `LEAST_SIDE` blocks before, the
   * largest of the squared differences of ln K, ln α, f and b in units of their variance (a Wald statistic for one
   * change at an unknown place). Beyond `CHANGED` the blocks before the cut are forgotten, and the estimate counts as
   * unsettled until a later window finds nothing.
   *
   * @returns whether blocks were forgotten
   */
  private forgetWhatChanged(pooled: PooledFit | null): boolean {
    const { state } = this;
    const offsets = this.blockOffsets();
    const sides = new CutSides(this.state, offsets, this.plan.sampleTime);
    let cut = 0;
    let most = CHANGED;
    // The oldest blocks hold the plant before any change that a cut could show: they differ from it the most.
    const oldest = Math.max(LEAST_SIDE, offsets.length - Math.max(...CUTS) - Math.max(...SKIPPED));
    for (const after of CUTS) {
      const k = offsets.length - after;
      if (k < oldest || sides.mostPossible(oldest, k) <= most) continue;
      for (const skipped of SKIPPED) {
        if (k - skipped < LEAST_SIDE || sides.mostPossible(k - skipped, k) <= most) continue;
        const statistic = contradiction(
          this.sideFit(offsets.slice(0, k - skipped)),
          this.sideFit(offsets.slice(k)),
        );
        if (statistic > most) {
          most = statistic;
          cut = k;
        }
      }
    }
    if (cut === 0 && this.newestFitBetter(offsets, pooled)) cut = offsets.length - NEWEST;
    state[STATE.unsettled] = cut > 0 ? 1 : 0;
    if (cut === 0) return false;
    state[STATE.blockCount] = offsets.length - cut;
    // What was simulated with the former plant says nothing about the fit of the new one.
    for (const o of offsets.slice(cut))
      for (const sum of [BLOCK.simulated, BLOCK.velocity, BLOCK.velocitySquare, BLOCK.residualSquare])
        state[o + sum] = 0;
    return true;
  }

  /**
   * Whether the newest blocks agree among themselves far better than all of them do: after a slow change the older
   * ones are themselves a mixture, too uncertain to contradict anything.
   */
  private newestFitBetter(offsets: readonly number[], pooled: PooledFit | null): boolean {
    if (!pooled || offsets.length < NEWEST + LEAST_SIDE) return false;
    const newest = offsets.slice(-NEWEST);
    const inflation = this.fit(
      newest,
      newest.map(() => 1),
      true,
      0,
    )?.fit.inflation;
    return inflation !== undefined && pooled.fit.inflation > MIXED * inflation;
  }

  /** A side of a cut, for `contradiction`. */
  private sideFit(offsets: readonly number[]): SideFit | null {
    // The dead time is held where the delay line has it: its pooled remainder is what a change upsets first. Gains by
    // direction in any case: one for both would take a difference between directions for noise.
    const side = this.fit(
      offsets,
      offsets.map(() => 1),
      true,
      0,
    );
    if (!side) return null;
    const { fit, figures } = side;
    const variance = (name: ChangingFigure): number => {
      const g = figures.gradients[name];
      return Math.max(0, covarianceOf(fit, g, g));
    };
    return CHANGING.map((name) => ({ value: figures[name], variance: variance(name) }));
  }
}

const CHANGING = ['lnGain', 'lnPole', 'coulomb', 'bias'] as const;
type ChangingFigure = (typeof CHANGING)[number];
type SideFit = { readonly value: number; readonly variance: number }[];

/** The largest squared difference between two sides in units of its variance. */
function contradiction(before: SideFit | null, after: SideFit | null): number {
  if (!before || !after) return 0;
  let most = 0;
  CHANGING.forEach((name, i) => {
    const difference = after[i]!.value - before[i]!.value;
    const variance = before[i]!.variance + after[i]!.variance + MODEL_ERROR[name] ** 2;
    most = Math.max(most, difference ** 2 / variance);
  });
  return most;
}

/**
 * Estimates of both sides of every cut from running totals of the blocks, without their variances: cheap enough to
 * ask first whether a cut can contradict at all.
 */
class CutSides {
  private readonly totals: Float64Array;
  private readonly known = new Map<number, PlantValues | null>();
  private readonly blocks: number;
  private readonly sums = new Float64Array(BLOCK.length);

  constructor(
    state: Float64Array,
    offsets: readonly number[],
    private readonly sampleTime: number,
  ) {
    this.blocks = offsets.length;
    this.totals = new Float64Array((offsets.length + 1) * BLOCK.length);
    offsets.forEach((offset, b) => {
      const at = b * BLOCK.length;
      for (let i = 0; i < BLOCK.length; i++)
        this.totals[at + BLOCK.length + i] = this.totals[at + i]! + state[offset + i]!;
    });
  }

  /** What `contradiction` of blocks 0 … end−1 against start … cannot exceed: the differences over the model's own error. */
  mostPossible(end: number, start: number): number {
    const before = this.side(0, end);
    const after = this.side(start, this.blocks);
    if (!before || !after) return 0;
    let most = 0;
    for (const name of CHANGING)
      most = Math.max(most, ((after[name] - before[name]) / MODEL_ERROR[name]) ** 2);
    return most;
  }

  private side(from: number, to: number): PlantValues | null {
    const key = from * RING * 2 + to;
    const known = this.known.get(key);
    if (known !== undefined) return known;
    const { sums, totals } = this;
    for (let i = 0; i < BLOCK.length; i++)
      sums[i] = totals[to * BLOCK.length + i]! - totals[from * BLOCK.length + i]!;
    const learned = sums[BLOCK.learned]!;
    const model = motionModel(
      sums[BLOCK.forward]! >= DIRECTION_SHARE * learned,
      sums[BLOCK.reverse]! >= DIRECTION_SHARE * learned,
      true,
      0,
    );
    const theta = solveSums(model, sums, 0);
    const values = theta && plantValues(model, theta, this.sampleTime);
    this.known.set(key, values);
    return values;
  }
}
