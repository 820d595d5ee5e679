import { Injectable } from '@nestjs/common';
import type { FrameBlock } from './frame-codec.js';

/** A block of the live stream that is kept. */
export interface KeptBlock {
  startUs: number;
  sampleTimeUs: number;
  target: Int32Array;
  position: Int32Array;
  output: Int16Array;
}

/** How much of the past is kept of every axis, s. */
export const KEPT_SECONDS = 11;

interface Recording {
  untilUs: number;
  blocks: KeptBlock[];
  done: (blocks: KeptBlock[]) => void;
}

/** Keeps the last seconds of every axis's samples in memory, and more of those that are being recorded. */
@Injectable()
export class SampleRecorder {
  private readonly kept = new Map<number, KeptBlock[]>();
  private readonly recordings = new Map<number, Recording[]>();

  /**
   * Takes a block that the intake has taken. Its arrays are views on the message, which nobody writes to again and
   * whose other blocks are kept as long: a copy would cost a tenth of the intake and save no memory.
   */
  push(axisId: number, { startUs, sampleTimeUs, target, position, output }: FrameBlock): void {
    const block = { startUs, sampleTimeUs, target, position, output };
    const past = this.kept.get(axisId) ?? [];
    // A clock that went back, or a time from the future before: what is older says nothing about now.
    if (past.length > 0 && past.at(-1)!.startUs >= startUs) past.length = 0;
    past.push(block);
    while (past[0]!.startUs < startUs - KEPT_SECONDS * 1e6) past.shift();
    this.kept.set(axisId, past);
    const recordings = this.recordings.get(axisId);
    if (!recordings) return;
    for (const recording of recordings) recording.blocks.push(block);
    const ended = recordings.filter(({ untilUs }) => startUs + target.length * sampleTimeUs >= untilUs);
    if (ended.length === 0) return;
    this.leave(axisId, ended);
    for (const { blocks, done } of ended) done(blocks);
  }

  /**
   * Records an axis from `before` seconds ago until `after` seconds from now, by the samples' own time.
   *
   * @param longest s after which it ends with what has come; an axis may fall silent
   */
  record(axisId: number, before: number, after: number, longest: number): Promise<KeptBlock[]> {
    const past = this.kept.get(axisId) ?? [];
    const newest = past.at(-1);
    const nowUs = newest ? newest.startUs + newest.target.length * newest.sampleTimeUs : Date.now() * 1000;
    return new Promise((resolve) => {
      const recording: Recording = {
        untilUs: nowUs + after * 1e6,
        blocks: before > 0 ? past.filter(({ startUs }) => startUs >= nowUs - before * 1e6) : [],
        done: (blocks) => {
          clearTimeout(timer);
          resolve(blocks);
        },
      };
      const timer = setTimeout(() => {
        this.leave(axisId, [recording]);
        resolve(recording.blocks);
      }, longest * 1000);
      timer.unref();
      this.recordings.set(axisId, [...(this.recordings.get(axisId) ?? []), recording]);
    });
  }

  private leave(axisId: number, ended: readonly Recording[]): void {
    const left = (this.recordings.get(axisId) ?? []).filter((recording) => !ended.includes(recording));
    if (left.length > 0) this.recordings.set(axisId, left);
    else this.recordings.delete(axisId);
  }
}
