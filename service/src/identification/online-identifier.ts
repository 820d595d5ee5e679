import {
  BLOCK,
  STATE,
  blockIsDue,
  filterPlan,
  filterSamples,
  restartFilters,
  type FilterPlan,
} from './motion-filter.js';
import {
  fitBlocks,
  motionModel,
  plantFigures,
  type BlockFit,
  type PlantFigures,
} from './motion-regression.js';
import type { PlantEstimate, PlantPrior, WindowEstimate } from './plant-estimate.js';
import {
  covarianceOf,
  describePlant,
  directionsDiffer,
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
/** Cuts at which a change is looked for: the newest window and the one before. */
const CUTS = 14;
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
    const learned = this.sum(offsets, BLOCK.learned);
    const forward = this.sum(offsets, BLOCK.forward) >= DIRECTION_SHARE * learned;
    const reverse = this.sum(offsets, BLOCK.reverse) >= DIRECTION_SHARE * learned;
    const fit = fitBlocks(motionModel(forward, reverse, directional, held), this.state, offsets, weights);
    const figures = fit && plantFigures(fit, this.plan.sampleTime);
    return fit && figures ? { fit, figures } : null;
  }

  private pooled(): PooledFit | null {
    const offsets = this.blockOffsets();
    const weights = offsets.map((_, i) => FORGETTING ** (offsets.length - 1 - i));
    const split = this.fit(offsets, weights, true, null);
    let chosen = this.fit(offsets, weights, false, null);
    if (split?.fit.model.directional && directionsDiffer(split.fit, split.figures)) chosen = split;
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
    if (closes) {
      state[STATE.windowOpen] = open + 1;
      this.forgetWhatChanged();
    }
    this.refresh();
  }

  /** Puts the pooled estimate to use: velocity simulation, held delay, and the delay line's dead time. */
  private refresh(): void {
    const { state, plan } = this;
    const pooled = this.pooled();
    if (!pooled) return;
    const { fit, figures } = pooled;
    const T = plan.sampleTime;
    const shift = figures.delayShift;
    const se = Math.sqrt(covarianceOf(fit, figures.gradients.delayShift, figures.gradients.delayShift));
    const moved = Math.min(Math.max(state[STATE.deadTime]! + shift, 0), plan.longestDelay);
    if (
      pooled.movingSeconds >= DELAY_MOTION &&
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
   * Looks for the newest change of the plant: over the cuts that leave at least `LEAST_SIDE` blocks on each side, the
   * largest of the squared differences of ln K, ln α, f and b in units of their variance (a Wald statistic for one
   * change at an unknown place). Beyond `CHANGED` the blocks before the cut are forgotten, and the estimate counts as
   * unsettled until a later window finds nothing.
   */
  private forgetWhatChanged(): void {
    const { state } = this;
    const offsets = this.blockOffsets();
    let cut = 0;
    let most = CHANGED;
    for (let k = Math.max(LEAST_SIDE, offsets.length - CUTS); k <= offsets.length - LEAST_SIDE; k++)
      for (const skipped of SKIPPED) {
        if (k - skipped < LEAST_SIDE) continue;
        const statistic = this.contradiction(offsets.slice(0, k - skipped), offsets.slice(k));
        if (statistic > most) {
          most = statistic;
          cut = k;
        }
      }
    if (cut === 0 && this.newestFitBetter(offsets)) cut = offsets.length - NEWEST;
    state[STATE.unsettled] = cut > 0 ? 1 : 0;
    if (cut === 0) return;
    state[STATE.blockCount] = offsets.length - cut;
    // What was simulated with the former plant says nothing about the fit of the new one.
    for (const o of offsets.slice(cut))
      for (const sum of [BLOCK.simulated, BLOCK.velocity, BLOCK.velocitySquare, BLOCK.residualSquare])
        state[o + sum] = 0;
  }

  /**
   * Whether the newest blocks agree among themselves far better than all of them do: after a slow change the older
   * ones are themselves a mixture, too uncertain to contradict anything.
   */
  private newestFitBetter(offsets: readonly number[]): boolean {
    if (offsets.length < NEWEST + LEAST_SIDE) return false;
    const spread = (some: readonly number[]): number | undefined =>
      this.fit(
        some,
        some.map(() => 1),
        true,
        0,
      )?.fit.inflation;
    const all = spread(offsets);
    const newest = spread(offsets.slice(-NEWEST));
    return all !== undefined && newest !== undefined && all > MIXED * newest;
  }

  private contradiction(before: readonly number[], after: readonly number[]): number {
    // The dead time is held where the delay line has it: its pooled remainder is what a change upsets first.
    const shift = 0;
    // Gains by direction in any case: one for both would take a difference between directions for noise.
    const fit = (offsets: readonly number[]) =>
      this.fit(
        offsets,
        offsets.map(() => 1),
        true,
        shift,
      );
    const a = fit(before);
    const b = fit(after);
    if (!a || !b) return 0;
    let most = 0;
    for (const name of ['lnGain', 'lnPole', 'coulomb', 'bias'] as const) {
      const difference = b.figures[name] - a.figures[name];
      const variance = figureVariance(a, name) + figureVariance(b, name) + MODEL_ERROR[name] ** 2;
      most = Math.max(most, difference ** 2 / variance);
    }
    return most;
  }
}

function figureVariance(
  part: { fit: BlockFit; figures: PlantFigures },
  name: keyof typeof MODEL_ERROR,
): number {
  const g = part.figures.gradients[name];
  return Math.max(0, covarianceOf(part.fit, g, g));
}
