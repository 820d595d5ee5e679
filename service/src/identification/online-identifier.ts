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
  PRODUCT_SUMS,
  fitBlocks,
  modelFor,
  solveSums,
  weightedTotal,
  type MotionModel,
} from './motion-regression.js';
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
import { CHANGING, CutSides, contradiction, type ChangingFigure, type SideFit } from './plant-change.js';

/** Blocks that the state remembers. */
const RING = 48;
/** Weight of a block against the next newer one: 0.96 a second of motion, a memory of about 25 s. */
const FORGETTING = 0.96;
/** Weights of a full memory, oldest first. */
const FADED = Float64Array.from({ length: RING }, (_, i) => FORGETTING ** (RING - 1 - i));
const EQUAL = new Float64Array(RING).fill(1);
/** Motion that closes a window, s. */
const WINDOW_MOTION = 3;
/** Stream time after which a window with `WINDOW_LEAST_MOTION` closes, s. */
const WINDOW_PATIENCE = 30;
const WINDOW_LEAST_MOTION = 1.5;
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

  private fit(offsets: readonly number[], weights: Float64Array, directional: boolean, held: number | null) {
    const fit = fitBlocks(this.modelOf(offsets, directional, held), this.state, offsets, weights);
    const figures = fit && plantFigures(fit, this.plan.sampleTime);
    return fit && figures ? { fit, figures } : null;
  }

  private modelOf(offsets: readonly number[], directional: boolean, held: number | null): MotionModel {
    const learned = this.sum(offsets, BLOCK.learned);
    return modelFor(
      this.sum(offsets, BLOCK.forward),
      this.sum(offsets, BLOCK.reverse),
      learned,
      directional,
      held,
    );
  }

  /**
   * The plant now, without its covariance, which costs most and is worked out only where the choice of gains by
   * direction hangs on it.
   */
  private plantNow(): PlantValues | null {
    const offsets = this.blockOffsets();
    const weights = FADED.subarray(RING - offsets.length);
    const total = weightedTotal(this.state, offsets, weights, 1, new Float64Array(PRODUCT_SUMS));
    const values = (directional: boolean): PlantValues | null => {
      const model = this.modelOf(offsets, directional, null);
      const theta = solveSums(model, total, 0);
      return theta && plantValues(model, theta, this.plan.sampleTime);
    };
    const split = values(true);
    return split && directionsMayDiffer(split) ? (this.pooled()?.figures ?? null) : values(false);
  }

  private pooled(): PooledFit | null {
    const offsets = this.blockOffsets();
    const weights = FADED.subarray(RING - offsets.length);
    const split = this.fit(offsets, weights, true, null);
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
    const single = this.fit(offsets, EQUAL, false, shift);
    const split = this.fit(offsets, EQUAL, true, shift);
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
    if (closes) {
      state[STATE.windowOpen] = open + 1;
      this.forgetWhatChanged();
    }
    const plant = this.plantNow();
    if (plant && !this.moveDelay(plant)) this.simulateWith(plant);
  }

  /** Moves the delay line to the dead time found, and starts over with it, where it is surely another. */
  private moveDelay({ delayShift }: PlantValues): boolean {
    const { state, plan } = this;
    const held = state[STATE.deadTime]!;
    const least = 0.4 * plan.sampleTime;
    const moved = Math.min(Math.max(held + delayShift, 0), plan.longestDelay);
    if (Math.abs(moved - held) <= least || this.movingSeconds(this.blockOffsets()) < DELAY_MOTION)
      return false;
    const pooled = this.pooled();
    if (!pooled) return false;
    const { fit, figures } = pooled;
    const se = Math.sqrt(covarianceOf(fit, figures.gradients.delayShift, figures.gradients.delayShift));
    if (Math.abs(moved - held) <= 4 * se) return false;
    // Sums of the old dead time do not fit the new one.
    state[STATE.deadTime] = moved;
    state[STATE.delayShift] = 0;
    state[STATE.blockCount] = 0;
    restartFilters(state, plan);
    return true;
  }

  /** Puts the plant to use: velocity simulation and the delay that windows hold. */
  private simulateWith({ lnPole, gainForward, gainReverse, coulomb, bias, delayShift }: PlantValues): void {
    const { state } = this;
    const T = this.plan.sampleTime;
    // More than a sample is no remainder but a pool that does not fit together.
    state[STATE.delayShift] = Math.min(Math.max(delayShift, -T), T);
    const a = Math.exp(-Math.exp(lnPole) * T);
    state[STATE.simA] = a;
    state[STATE.simForward] = gainForward * (1 - a);
    state[STATE.simReverse] = gainReverse * (1 - a);
    state[STATE.simFrictionForward] = gainForward * (1 - a) * (coulomb + bias);
    state[STATE.simFrictionReverse] = gainReverse * (1 - a) * (coulomb - bias);
    state[STATE.simReady] = 1;
  }

  /**
   * Looks for the newest change of the plant: over the cuts of `CUTS` that leave at least `LEAST_SIDE` blocks before, the
   * largest of the squared differences of ln K, ln α, f and b in units of their variance (a Wald statistic for one
   * change at an unknown place). Beyond `CHANGED` the blocks before the cut are forgotten, and the estimate counts as
   * unsettled until a later window finds nothing.
   */
  private forgetWhatChanged(): void {
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
    if (cut === 0 && this.newestFitBetter(offsets, sides)) cut = offsets.length - NEWEST;
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
  private newestFitBetter(offsets: readonly number[], sides: CutSides): boolean {
    const older = offsets.length - NEWEST;
    if (older < LEAST_SIDE || sides.agree(older)) return false;
    const all = this.pooled()?.fit.inflation;
    const newest = this.fit(offsets.slice(-NEWEST), EQUAL, true, 0)?.fit.inflation;
    return all !== undefined && newest !== undefined && all > MIXED * newest;
  }

  /** A side of a cut, for `contradiction`. */
  private sideFit(offsets: readonly number[]): SideFit | null {
    // The dead time is held where the delay line has it: its pooled remainder is what a change upsets first. Gains by
    // direction in any case: one for both would take a difference between directions for noise.
    const side = this.fit(offsets, EQUAL, true, 0);
    if (!side) return null;
    const { fit, figures } = side;
    const variance = (name: ChangingFigure): number => {
      const g = figures.gradients[name];
      return Math.max(0, covarianceOf(fit, g, g));
    };
    return CHANGING.map((name) => ({ value: figures[name], variance: variance(name) }));
  }
}
