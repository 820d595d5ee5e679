import type { Frame } from '@polewright/service/frame-codec';

/** Frames that the service has not yet made durable, oldest first, bounded by the time that they span. */
export class ReplayBuffer {
  private frames: Frame[] = [];
  /** Index of the next frame to send. */
  private cursor = 0;
  private lastSequence = 0;
  /** Whether frames were lost between what was sent before and the next frame. */
  private lost = false;
  /** Frames that fell out of the buffer before they were durable. */
  dropped = 0;

  /** @param longestUs how much time may be kept, µs; the oldest goes first */
  constructor(private readonly longestUs: number) {}

  get size(): number {
    return this.frames.length;
  }

  /** The last sequence given out in this epoch. */
  get last(): number {
    return this.lastSequence;
  }

  /** Takes the samples of one stretch of time as the next frame. */
  add(blocks: Frame['blocks']): void {
    this.frames.push({ sequence: ++this.lastSequence, blocks });
    const newest = startOf(this.frames.at(-1)!);
    let drop = 0;
    while (drop < this.frames.length - 1 && newest - startOf(this.frames[drop]!) > this.longestUs) drop++;
    if (drop === 0) return;
    this.frames.splice(0, drop);
    this.dropped += drop;
    if (this.cursor < drop) this.lost = true;
    this.cursor = Math.max(0, this.cursor - drop);
  }

  /** Everything up to a sequence survives a crash of the service and need not be kept. */
  durable(sequence: number): void {
    let kept = 0;
    while (kept < this.frames.length && this.frames[kept]!.sequence <= sequence) kept++;
    this.frames.splice(0, kept);
    if (kept > this.cursor) this.lost = false;
    this.cursor = Math.max(0, this.cursor - kept);
  }

  /** After a reconnect: goes on with the first frame after the durable sequence, or the oldest that is left. */
  rewind(durableSequence: number): void {
    this.durable(durableSequence);
    this.cursor = 0;
    const oldest = this.frames[0];
    this.lost = oldest !== undefined && oldest.sequence > durableSequence + 1;
  }

  /** A new epoch: what is kept counts from 1 again. */
  renumber(): void {
    this.frames = this.frames.map((frame, i) => ({ ...frame, sequence: i + 1 }));
    this.lastSequence = this.frames.length;
    this.cursor = 0;
  }

  /** The next frame to send, with its gap flags set where frames before it were lost; null when all are sent. */
  next(): Frame | null {
    const frame = this.frames[this.cursor];
    if (!frame) return null;
    if (!this.lost) return frame;
    return { ...frame, blocks: frame.blocks.map((block) => ({ ...block, gapBefore: true })) };
  }

  /** The frame was taken, or refused for good; refused samples are missing before the next frame. */
  settle(sequence: number, taken: boolean): void {
    if (this.frames[this.cursor]?.sequence !== sequence) return;
    this.lost = !taken;
    if (taken) this.cursor++;
    else this.frames.splice(this.cursor, 1);
  }
}

const startOf = (frame: Frame): number => frame.blocks[0]?.startUs ?? 0;
