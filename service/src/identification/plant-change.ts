import { BLOCK } from './motion-filter.js';
import { modelFor, solveSums } from './motion-regression.js';
import { plantValues, type PlantValues } from './plant-figures.js';

/** What fits of one unchanged plant may differ by beside their own errors (common practice, no source). */
const MODEL_ERROR = { lnGain: 0.01, lnPole: 0.02, coulomb: 0.08, bias: 0.08 } as const;

export const CHANGING = ['lnGain', 'lnPole', 'coulomb', 'bias'] as const;
export type ChangingFigure = (typeof CHANGING)[number];
export type SideFit = { readonly value: number; readonly variance: number }[];

/** The largest squared difference between two sides in units of its variance. */
export function contradiction(before: SideFit | null, after: SideFit | null): number {
  if (!before || !after) return 0;
  let most = 0;
  CHANGING.forEach((name, i) => {
    const difference = after[i]!.value - before[i]!.value;
    const variance = before[i]!.variance + after[i]!.variance + MODEL_ERROR[name] ** 2;
    most = Math.max(most, difference ** 2 / variance);
  });
  return most;
}

/** The fields of a block that a side of a cut needs: its products, and the motion by direction. */
const SIDE = BLOCK.reverse + 1;

/**
 * Estimates of both sides of every cut from running totals of the blocks, without their variances: cheap enough to
 * ask first whether a cut can contradict at all.
 */
export class CutSides {
  private readonly totals: Float64Array;
  private readonly known = new Map<number, PlantValues | null>();
  private readonly blocks: number;
  private readonly sums = new Float64Array(SIDE);

  constructor(
    state: Float64Array,
    offsets: readonly number[],
    private readonly sampleTime: number,
  ) {
    this.blocks = offsets.length;
    const totals = new Float64Array((offsets.length + 1) * SIDE);
    for (let b = 0; b < offsets.length; b++) {
      const offset = offsets[b]!;
      const at = b * SIDE;
      for (let i = 0; i < SIDE; i++) totals[at + SIDE + i] = totals[at + i]! + state[offset + i]!;
    }
    this.totals = totals;
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

  /** Whether both sides of a cut are plants that differ by no more than the model's own error. */
  agree(cut: number): boolean {
    return (
      this.side(0, cut) !== null && this.side(cut, this.blocks) !== null && this.mostPossible(cut, cut) <= 1
    );
  }

  private side(from: number, to: number): PlantValues | null {
    const key = from * (this.blocks + 1) + to;
    const known = this.known.get(key);
    if (known !== undefined) return known;
    const { sums, totals } = this;
    for (let i = 0; i < SIDE; i++) sums[i] = totals[to * SIDE + i]! - totals[from * SIDE + i]!;
    const model = modelFor(sums[BLOCK.forward]!, sums[BLOCK.reverse]!, sums[BLOCK.learned]!, true, 0);
    const theta = solveSums(model, sums, 0);
    const values = theta && plantValues(model, theta, this.sampleTime);
    this.known.set(key, values);
    return values;
  }
}
