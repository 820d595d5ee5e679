import {
  createDriftChart,
  updateDriftChart,
  type DriftChart,
  type DriftDecision,
} from '../drift/drift-chart.js';
import type { Baseline, Tolerances } from '../fleet/axis.entity.js';
import { OnlineIdentifier } from '../identification/online-identifier.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';
import { MoveRecorder, type RecordedMove } from '../indicators/move-recorder.js';
import { SecondAccumulator, type ClosedSecond } from '../indicators/second-accumulator.js';
import type { FrameBlock } from './frame-codec.js';
import { StateImage } from './state-image.js';

/** What the pipeline must know of its axis. */
export interface AxisFacts {
  id: number;
  siteId: number;
  tag: string;
  sampleTime: number;
  resolution: number;
  /** Frequency scale of the closed loop, rad/s. */
  loopFrequency: number;
  baseline: Baseline | null;
  tolerances: Tolerances;
  revision: number;
  inMaintenance: boolean;
}

/** What the control chart says of both quantities. */
export interface DriftDecisions {
  gain: DriftDecision;
  pole: DriftDecision;
}

/** A plant estimate after one more window, with what the control chart makes of it. */
export interface EstimateAfterWindow {
  /** s since the Unix epoch */
  t: number;
  estimate: PlantEstimate;
  decisions: DriftDecisions | null;
}

/** Assumed plant before anything is known: only scales and filters are chosen from it. */
const UNKNOWN_PLANT = { gain: 10, pole: 30 };
/** Time stamps may differ from the sample grid by this share of a sample before it counts as a gap. */
const GRID_TOLERANCE = 0.5;
/** An axis stands once its target has been at rest and its position within this many counts for STANDING_SECONDS. */
const STANDING_COUNTS = 5;
const STANDING_SECONDS = 1;

const LAST_US = 0; // time of the last sample taken, or 0
const STANDING_SINCE_US = 1;
const STANDING_TARGET = 2;
const STANDING_POSITION = 3;
const DROPPED = 4; // samples refused because their time went back
const OWN_LENGTH = 5;

/**
 * What the samples of one axis go through: seconds, moves, identification, drift chart. Its whole knowledge is a
 * handful of typed arrays and the chart, so a copy of them is a checkpoint and putting it back continues to the bit;
 * `image` says which parts of the arrays changed since they were last written.
 */
export class AxisPipeline {
  readonly seconds: SecondAccumulator;
  readonly moves: MoveRecorder;
  readonly identifier: OnlineIdentifier;
  chart: DriftChart | null;
  decisions: DriftDecisions | null = null;
  estimate: PlantEstimate | null = null;

  /** What closed since the last checkpoint, emptied by it. */
  closedSeconds: ClosedSecond[] = [];
  closedMoves: (RecordedMove & { revision: number })[] = [];
  closedEstimates: EstimateAfterWindow[] = [];
  /** When the last samples arrived, s since the Unix epoch by the service's clock; after a restart their own time. */
  heardAt: number | null = null;
  /** Whether there is anything to write. */
  touched = false;

  /** The typed arrays against what of them is in the database. */
  readonly image: StateImage;
  private judgementChanged = true;
  private readonly own = new Float64Array(OWN_LENGTH);
  private readonly stepUs: number;

  constructor(public facts: AxisFacts) {
    const { sampleTime, resolution, loopFrequency, baseline } = facts;
    this.stepUs = Math.round(sampleTime * 1e6);
    this.seconds = new SecondAccumulator({ sampleTime, resolution, loopFrequency });
    this.moves = new MoveRecorder(resolution);
    const { gain, pole } = baseline ?? UNKNOWN_PLANT;
    this.identifier = new OnlineIdentifier({ gain, pole, sampleTime, resolution });
    this.chart = baseline && createDriftChart(baseline, facts.tolerances);
    this.image = new StateImage([this.own, this.seconds.state, this.moves.state, this.identifier.state]);
  }

  /** Time of the last sample, s since the Unix epoch; null before the first. */
  get lastSampleAt(): number | null {
    return this.own[LAST_US]! > 0 ? this.own[LAST_US]! / 1e6 : null;
  }

  get droppedSamples(): number {
    return this.own[DROPPED]!;
  }

  /** Whether target and position have been at rest for the last second. */
  get standing(): boolean {
    const { own } = this;
    return own[LAST_US]! > 0 && own[LAST_US]! - own[STANDING_SINCE_US]! >= STANDING_SECONDS * 1e6;
  }

  /** Samples are missing before the next block. */
  gap(): void {
    this.seconds.gap();
    this.moves.gap();
    this.identifier.gap();
    this.own[STANDING_SINCE_US] = this.own[LAST_US]!;
  }

  /**
   * Forgets the time of a last sample that lies beyond `latestUs`, which would have everything that follows dropped.
   *
   * @returns whether it did
   */
  forgetFuture(latestUs: number): boolean {
    if (this.own[LAST_US]! <= latestUs) return false;
    this.own[LAST_US] = 0;
    this.heardAt = null;
    this.gap();
    return true;
  }

  /**
   * Takes a block. Samples not later than the last one taken are dropped and counted; a hole in time is a gap.
   *
   * @returns samples dropped
   */
  push(block: FrameBlock): number {
    const { own, stepUs } = this;
    const { target, position, output, startUs } = block;
    const lastUs = own[LAST_US]!;
    let from = 0;
    if (lastUs > 0) {
      if (startUs <= lastUs) {
        from = Math.min(target.length, Math.floor((lastUs - startUs) / stepUs) + 1);
        own[DROPPED]! += from;
      } else if (block.gapBefore || startUs - lastUs > stepUs * (1 + GRID_TOLERANCE)) this.gap();
      if (from === target.length) return from;
    }
    this.touched = true;
    this.heardAt = Date.now() / 1000;
    this.seconds.push(target, position, output, startUs, stepUs, from, this.closeSecond);
    this.moves.push(target, position, output, startUs, stepUs, from, this.closeMove);
    this.noteStanding(block, from);
    own[LAST_US] = startUs + (target.length - 1) * stepUs;
    if (this.facts.inMaintenance) return from; // moves by hand are not production
    this.identifier.push(position, output, from, target.length);
    this.takeWindows();
    return from;
  }

  private readonly closeSecond = (second: ClosedSecond): void => void this.closedSeconds.push(second);
  private readonly closeMove = (move: RecordedMove): void => {
    if (!this.facts.inMaintenance) this.closedMoves.push({ ...move, revision: this.facts.revision });
  };

  /** A new baseline or tuning: what was learned about drift no longer counts. */
  restartDrift(facts: AxisFacts): void {
    this.facts = facts;
    this.chart = facts.baseline && createDriftChart(facts.baseline, facts.tolerances);
    this.decisions = null;
    this.judgementChanged = true;
    this.touched = true;
  }

  private takeWindows(): void {
    for (let window = this.identifier.takeWindow(); window; window = this.identifier.takeWindow()) {
      const estimate = this.identifier.estimate();
      if (!estimate) continue;
      this.judgementChanged = true;
      this.estimate = estimate;
      if (this.chart) {
        const [gain, pole] = updateDriftChart(this.chart, window, estimate);
        this.decisions = { gain: gain!, pole: pole! };
      }
      this.closedEstimates.push({
        t: this.lastSampleAt!,
        estimate,
        decisions: this.decisions,
      });
    }
  }

  private noteStanding({ target, position, startUs }: FrameBlock, from: number): void {
    const { own, stepUs } = this;
    let restTarget = own[STANDING_TARGET]!;
    let restPosition = own[STANDING_POSITION]!;
    let since = -1;
    for (let i = from; i < target.length; i++) {
      const r = target[i]!;
      const y = position[i]!;
      const off = y - restPosition;
      if (r !== restTarget || off > STANDING_COUNTS || off < -STANDING_COUNTS) {
        restTarget = r;
        restPosition = y;
        since = i;
      }
    }
    if (since < 0) return;
    own[STANDING_TARGET] = restTarget;
    own[STANDING_POSITION] = restPosition;
    own[STANDING_SINCE_US] = startUs + since * stepUs;
  }

  /** What is known beside the samples' sums, as JSON; null while it is what was last written. */
  changedJudgement(): string | null {
    return this.judgementChanged
      ? JSON.stringify({ chart: this.chart, decisions: this.decisions, estimate: this.estimate })
      : null;
  }

  /** The judgement and all parts of `image` that changed are in the database now. */
  accept(): void {
    this.judgementChanged = false;
  }

  /** A write failed: nothing counts as written any more. */
  forgetWritten(): void {
    this.judgementChanged = true;
    this.image.forget();
  }

  /**
   * Puts a saved state back.
   *
   * @param judgement JSON as `changedJudgement` gave it
   * @param parts the image's parts, in order
   * @returns false, and changes nothing, when the state was saved by a pipeline of another layout
   */
  restore(judgement: string, parts: readonly Buffer[]): boolean {
    if (!this.image.restore(parts)) return false;
    const { chart, decisions, estimate } = JSON.parse(judgement) as Pick<
      AxisPipeline,
      'chart' | 'decisions' | 'estimate'
    >;
    this.chart = chart;
    this.decisions = decisions;
    this.estimate = estimate;
    this.judgementChanged = false;
    this.heardAt = this.lastSampleAt;
    return true;
  }
}
