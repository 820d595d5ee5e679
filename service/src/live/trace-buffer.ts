import type { FrameBlock } from '../telemetry/frame-codec.js';

/** Samples of one axis since the last message, thinned to what a chart can show. */
export interface TraceMessage {
  axisId: number;
  /** s since the Unix epoch */
  time: number[];
  /** mm */
  target: number[];
  /** mm */
  position: number[];
  /** % */
  output: number[];
}

/** Points a second of a live chart that does not say how many it can show, and the bounds of what it may ask for. */
export const TRACE_RATE = { usual: 200, least: 10, most: 1_000 };
/** A page that does not fetch for this long, s, loses what is older. */
const KEEP_SECONDS = 5;

/**
 * Thins raw samples by extremes: of every stretch the samples with the least and the largest following error are kept,
 * so that a peak of one sample stays visible.
 */
export class TraceBuffer {
  private points: [time: number, target: number, position: number, output: number][] = [];
  private readonly stretch: number;
  private readonly most: number;

  /** @param rate points a second that the chart can show: two a pixel, a least and a largest */
  constructor(
    private readonly facts: { id: number; resolution: number; sampleTime: number },
    rate = TRACE_RATE.usual,
  ) {
    const bounded = Math.min(TRACE_RATE.most, Math.max(TRACE_RATE.least, rate));
    this.stretch = Math.max(1, Math.ceil(2 / (bounded * facts.sampleTime)));
    this.most = bounded * KEEP_SECONDS;
  }

  push({ target, position, output, startUs, sampleTimeUs }: FrameBlock): void {
    const q = this.facts.resolution;
    const keep = (i: number): void => {
      this.points.push([
        (startUs + i * sampleTimeUs) / 1e6,
        target[i]! * q,
        position[i]! * q,
        output[i]! / 100,
      ]);
    };
    for (let from = 0; from < target.length; from += this.stretch) {
      const to = Math.min(target.length, from + this.stretch);
      let least = from;
      let most = from;
      for (let i = from; i < to; i++) {
        const error = target[i]! - position[i]!;
        if (error < target[least]! - position[least]!) least = i;
        if (error > target[most]! - position[most]!) most = i;
      }
      keep(Math.min(least, most));
      if (least !== most) keep(Math.max(least, most));
    }
    if (this.points.length > this.most) this.points = this.points.slice(-this.most);
  }

  take(): TraceMessage | null {
    if (this.points.length === 0) return null;
    const { points } = this;
    this.points = [];
    return {
      axisId: this.facts.id,
      time: points.map(([time]) => time),
      target: points.map(([, target]) => target),
      position: points.map(([, , position]) => position),
      output: points.map(([, , , output]) => output),
    };
  }
}
