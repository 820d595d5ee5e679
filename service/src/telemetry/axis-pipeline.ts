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
 * handful of typed arrays and the chart, so a copy of them is a checkpoint and putting it back continues to the bit.
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

  /** Takes a block. Samples not later than the last one taken are dropped and counted; a hole in time is a gap. */
  push(block: FrameBlock): void {
    const { own, stepUs } = this;
    const { target, position, output, startUs } = block;
    const lastUs = own[LAST_US]!;
    let from = 0;
    if (lastUs > 0) {
      if (startUs <= lastUs) {
        from = Math.min(target.length, Math.floor((lastUs - startUs) / stepUs) + 1);
        own[DROPPED]! += from;
      } else if (block.gapBefore || startUs - lastUs > stepUs * (1 + GRID_TOLERANCE)) this.gap();
      if (from === target.length) return;
    }
    this.touched = true;
    this.heardAt = Date.now() / 1000;
    this.seconds.push(target, position, output, startUs, stepUs, from, (second) =>
      this.closedSeconds.push(second),
    );
    this.moves.push(target, position, output, startUs, stepUs, from, (move) => {
      if (!this.facts.inMaintenance) this.closedMoves.push({ ...move, revision: this.facts.revision });
    });
    this.noteStanding(block, from);
    own[LAST_US] = startUs + (target.length - 1) * stepUs;
    if (this.facts.inMaintenance) return; // moves by hand are not production
    this.identifier.push(position, output, from, target.length);
    this.takeWindows();
  }

  /** A new baseline or tuning: what was learned about drift no longer counts. */
  restartDrift(facts: AxisFacts): void {
    this.facts = facts;
    this.chart = facts.baseline && createDriftChart(facts.baseline, facts.tolerances);
    this.decisions = null;
    this.touched = true;
  }

  private takeWindows(): void {
    for (let window = this.identifier.takeWindow(); window; window = this.identifier.takeWindow()) {
      const estimate = this.identifier.estimate();
      if (!estimate) continue;
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
    for (let i = from; i < target.length; i++) {
      if (
        target[i] !== own[STANDING_TARGET] ||
        Math.abs(position[i]! - own[STANDING_POSITION]!) > STANDING_COUNTS
      ) {
        own[STANDING_TARGET] = target[i]!;
        own[STANDING_POSITION] = position[i]!;
        own[STANDING_SINCE_US] = startUs + i * stepUs;
      }
    }
  }

  /** The pipeline's whole knowledge: a JSON header and the typed arrays, in a fixed order. */
  save(): Buffer {
    const header = Buffer.from(
      JSON.stringify({ chart: this.chart, decisions: this.decisions, estimate: this.estimate }),
    );
    const length = Buffer.alloc(4);
    length.writeUInt32LE(header.byteLength);
    return Buffer.concat([
      length,
      header,
      ...this.arrays().map((array) => Buffer.from(array.buffer, array.byteOffset, array.byteLength)),
    ]);
  }

  /**
   * Puts a saved state back.
   *
   * @returns false, and changes nothing, when the state was saved by a pipeline of another layout
   */
  restore(saved: Buffer): boolean {
    const headerBytes = saved.readUInt32LE(0);
    const arrays = this.arrays();
    const expected = arrays.reduce((sum, array) => sum + array.byteLength, 4 + headerBytes);
    if (saved.byteLength !== expected) return false;
    const header = JSON.parse(saved.toString('utf8', 4, 4 + headerBytes)) as Pick<
      AxisPipeline,
      'chart' | 'decisions' | 'estimate'
    >;
    this.chart = header.chart;
    this.decisions = header.decisions;
    this.estimate = header.estimate;
    let at = 4 + headerBytes;
    for (const array of arrays) {
      new Uint8Array(array.buffer, array.byteOffset, array.byteLength).set(
        saved.subarray(at, at + array.byteLength),
      );
      at += array.byteLength;
    }
    this.heardAt = this.lastSampleAt;
    return true;
  }

  private arrays(): Float64Array[] {
    return [this.own, this.seconds.state, this.moves.state, this.identifier.state];
  }
}
