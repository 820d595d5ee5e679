import type { FrameBlock } from '@polewright/service/frame-codec';
import { describe, expect, it } from 'vitest';
import { ReplayBuffer } from './replay-buffer.js';

const block = (startUs: number): FrameBlock => ({
  axisIndex: 0,
  motionEnabled: true,
  gapBefore: false,
  sampleTimeUs: 1000,
  startUs,
  target: Int32Array.of(1),
  position: Int32Array.of(1),
  output: Int16Array.of(1),
});

/** A buffer of 10 s with one frame a second, the first at 0. */
function bufferWith(frames: number): ReplayBuffer {
  const buffer = new ReplayBuffer(10e6);
  for (let i = 0; i < frames; i++) buffer.add([block(i * 1e6)]);
  return buffer;
}

/** Sends everything that waits. */
function drain(buffer: ReplayBuffer): { sequence: number; gap: boolean }[] {
  const sent = [];
  for (let frame = buffer.next(); frame; frame = buffer.next()) {
    sent.push({ sequence: frame.sequence, gap: frame.blocks[0]!.gapBefore });
    buffer.settle(frame.sequence, true);
  }
  return sent;
}
const sequences = (buffer: ReplayBuffer): number[] => drain(buffer).map(({ sequence }) => sequence);

describe('ReplayBuffer', () => {
  it('counts from 1 and keeps what was sent until it is durable', () => {
    const buffer = bufferWith(4);
    expect(sequences(buffer)).toEqual([1, 2, 3, 4]);
    expect(buffer.size).toBe(4);
    buffer.durable(3);
    expect(buffer.size).toBe(1);
    buffer.add([block(4e6)]);
    expect(sequences(buffer)).toEqual([5]);
  });

  it('after a reconnect goes on behind the durable sequence, without a gap', () => {
    const buffer = bufferWith(5);
    drain(buffer);
    buffer.rewind(2);
    expect(drain(buffer)).toEqual([3, 4, 5].map((sequence) => ({ sequence, gap: false })));
  });

  it('drops the oldest beyond its length and marks the gap once', () => {
    const buffer = bufferWith(15);
    expect(buffer.size).toBe(11);
    expect(buffer.dropped).toBe(4);
    const sent = drain(buffer);
    expect(sent[0]).toEqual({ sequence: 5, gap: true });
    expect(sent.slice(1).every(({ gap }) => !gap)).toBe(true);
  });

  it('marks no gap when only frames that were sent fall out', () => {
    const buffer = bufferWith(8);
    drain(buffer);
    for (let i = 8; i < 12; i++) buffer.add([block(i * 1e6)]);
    expect(drain(buffer)).toEqual([9, 10, 11, 12].map((sequence) => ({ sequence, gap: false })));
  });

  it('marks the gap when a service that lost its memory asks for what is gone', () => {
    const buffer = bufferWith(5);
    drain(buffer);
    buffer.durable(3);
    buffer.rewind(0);
    expect(drain(buffer)).toEqual([
      { sequence: 4, gap: true },
      { sequence: 5, gap: false },
    ]);
  });

  it('leaves out a frame that was refused for good and marks the gap', () => {
    const buffer = bufferWith(3);
    buffer.settle(buffer.next()!.sequence, false);
    expect(drain(buffer)).toEqual([
      { sequence: 2, gap: true },
      { sequence: 3, gap: false },
    ]);
  });

  it('is not confused by a frame that becomes durable before its answer arrives', () => {
    const buffer = bufferWith(3);
    const first = buffer.next()!;
    buffer.durable(1);
    buffer.settle(first.sequence, true);
    expect(sequences(buffer)).toEqual([2, 3]);
  });

  it('counts anew in a new epoch', () => {
    const buffer = bufferWith(5);
    buffer.durable(2);
    buffer.renumber();
    buffer.add([block(5e6)]);
    expect(sequences(buffer)).toEqual([1, 2, 3, 4]);
    expect(buffer.last).toBe(4);
  });
});
