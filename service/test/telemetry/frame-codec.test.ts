import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import {
  blockBytes,
  decodeFrame,
  encodeFrame,
  FrameError,
  MAX_FRAME_BYTES,
  type Frame,
  type FrameBlock,
} from '../../src/telemetry/frame-codec.js';

const anyBlock = fc.integer({ min: 1, max: 40 }).chain((n) => {
  const counts = fc
    .array(fc.integer({ min: -(2 ** 31), max: 2 ** 31 - 1 }), { minLength: n, maxLength: n })
    .map((values) => Int32Array.from(values));
  return fc.record<FrameBlock>({
    axisIndex: fc.integer({ min: 0, max: 65_535 }),
    motionEnabled: fc.boolean(),
    gapBefore: fc.boolean(),
    sampleTimeUs: fc.integer({ min: 1, max: 10_000_000 }),
    startUs: fc.integer({ min: 0, max: Number.MAX_SAFE_INTEGER }),
    target: counts,
    position: counts,
    output: fc
      .array(fc.integer({ min: -10_000, max: 10_000 }), { minLength: n, maxLength: n })
      .map((values) => Int16Array.from(values)),
  });
});
const anyFrame = fc.record<Frame>({
  sequence: fc.integer({ min: 1, max: Number.MAX_SAFE_INTEGER }),
  blocks: fc.array(anyBlock, { maxLength: 5 }),
});

const block: FrameBlock = {
  axisIndex: 3,
  motionEnabled: true,
  gapBefore: false,
  sampleTimeUs: 1_000,
  startUs: 1_700_000_000_123_456,
  target: Int32Array.of(1, -2, 3),
  position: Int32Array.of(4, 5, -6),
  output: Int16Array.of(7, -8, 10_000),
};

/** A good frame with one field overwritten. */
function spoilt(change: (view: DataView) => void): Uint8Array {
  const bytes = encodeFrame({ sequence: 9, blocks: [block] });
  change(new DataView(bytes.buffer));
  return bytes;
}

function reasonOf(message: unknown): string {
  try {
    decodeFrame(message as Uint8Array);
  } catch (error) {
    if (error instanceof FrameError) return error.reason;
    throw error;
  }
  return 'accepted';
}

describe('a frame', () => {
  test('comes back as it was written, whatever it carries', () => {
    fc.assert(
      fc.property(anyFrame, (frame) => {
        expect(decodeFrame(encodeFrame(frame))).toEqual(frame);
      }),
      { numRuns: 300 },
    );
  });

  test('has the bytes of the table in the contract, little-endian', () => {
    const bytes = encodeFrame({ sequence: 0x0102030405, blocks: [block] });
    expect(Buffer.from(bytes.subarray(0, 40)).toString('hex')).toBe(
      // magic "PWT1", version 1, one block, sequence
      '50575431' +
        '0100' +
        '0100' +
        '0504030201000000' +
        // index 3, motion enabled, 3 samples, 1000 µs, reserved, first time
        '0300' +
        '0100' +
        '03000000' +
        'e8030000' +
        '00000000' +
        Buffer.from(BigInt64Array.of(1_700_000_000_123_456n).buffer).toString('hex'),
    );
    // 3 · (4 + 4 + 2) bytes of samples, and two of padding
    expect(bytes.byteLength).toBe(16 + 24 + 32);
    expect(blockBytes(3)).toBe(24 + 32);
  });

  test('is read by views on the message, without a copy', () => {
    const bytes = encodeFrame({ sequence: 1, blocks: [block] });
    const [read] = decodeFrame(bytes).blocks;
    for (const samples of [read!.target, read!.position, read!.output])
      expect(samples.buffer).toBe(bytes.buffer);
    new DataView(bytes.buffer).setInt32(16 + 24, 77, true);
    expect(read!.target[0]).toBe(77);
  });

  test.each([1, 2, 3])('that starts %i bytes off the boundary is copied once and read', (off) => {
    const bytes = encodeFrame({ sequence: 1, blocks: [block, block] });
    const pool = Buffer.alloc(bytes.byteLength + 8);
    pool.set(bytes, off);
    const misaligned = pool.subarray(off, off + bytes.byteLength);
    // Buffer.alloc starts on a boundary, so the message does not.
    expect(misaligned.byteOffset % 4).toBe(off);
    const frame = decodeFrame(misaligned);
    expect(frame).toEqual({ sequence: 1, blocks: [block, block] });
    expect(frame.blocks[0]!.target.buffer).not.toBe(pool.buffer);
  });

  test('with arrays of different length is not written', () => {
    expect(() => encodeFrame({ sequence: 1, blocks: [{ ...block, output: new Int16Array(2) }] })).toThrow(
      RangeError,
    );
  });
});

describe('a frame is refused, by name', () => {
  const good = encodeFrame({ sequence: 9, blocks: [block] });
  test.each<[string, unknown]>([
    ['not-binary', 'PWT1'],
    ['not-binary', null],
    ['not-binary', { sequence: 1 }],
    ['too-long', new Uint8Array(MAX_FRAME_BYTES + 4)],
    ['too-short', good.subarray(0, 15)],
    ['too-short', new Uint8Array(0)],
    ['wrong-magic', spoilt((view) => view.setUint32(0, 0x50575431, true))],
    ['wrong-version', spoilt((view) => view.setUint16(4, 2, true))],
    ['bad-sequence', spoilt((view) => view.setBigUint64(8, 0n, true))],
    ['bad-sequence', spoilt((view) => view.setBigUint64(8, 1n << 53n, true))],
    ['truncated', good.subarray(0, 30)],
    ['truncated', good.subarray(0, good.byteLength - 4)],
    ['truncated', spoilt((view) => view.setUint16(6, 2, true))],
    ['truncated', spoilt((view) => view.setUint32(20, 0xffff_ffff, true))],
    ['no-samples', spoilt((view) => view.setUint32(20, 0, true))],
    ['bad-sample-time', spoilt((view) => view.setUint32(24, 0, true))],
    ['bad-sample-time', spoilt((view) => view.setUint32(24, 10_000_001, true))],
    ['bad-time', spoilt((view) => view.setBigInt64(32, -1n, true))],
    ['bad-time', spoilt((view) => view.setBigInt64(32, 1n << 60n, true))],
    ['bad-output', spoilt((view) => view.setInt16(16 + 24 + 24, 10_001, true))],
    ['bad-output', spoilt((view) => view.setInt16(16 + 24 + 24, -10_001, true))],
    ['trailing-bytes', spoilt((view) => view.setUint16(6, 0, true))],
    ['trailing-bytes', Buffer.concat([good, Buffer.alloc(4)])],
  ])('%s', (reason, message) => {
    expect(reasonOf(message)).toBe(reason);
  });

  test('also when cut anywhere', () => {
    const bytes = encodeFrame({ sequence: 9, blocks: [block, block] });
    for (let length = 0; length < bytes.byteLength; length++)
      expect(['too-short', 'truncated']).toContain(reasonOf(bytes.subarray(0, length)));
  });
});

test('mutated and made-up bytes are read or refused by name, never anything else', () => {
  const outcomes = new Set<string>();
  fc.assert(
    fc.property(
      anyFrame,
      fc.array(fc.tuple(fc.nat(), fc.integer({ min: 0, max: 255 })), { minLength: 1, maxLength: 6 }),
      fc.nat(),
      (frame, changes, cut) => {
        const bytes = encodeFrame(frame);
        for (const [at, value] of changes) bytes[at % bytes.byteLength] = value;
        outcomes.add(reasonOf(bytes));
        outcomes.add(reasonOf(bytes.subarray(0, cut % (bytes.byteLength + 1))));
      },
    ),
    { numRuns: 1_000 },
  );
  fc.assert(fc.property(fc.uint8Array({ maxLength: 200 }), (bytes) => void outcomes.add(reasonOf(bytes))));
  // Otherwise the mutations never reached the checks.
  expect(outcomes.size).toBeGreaterThan(5);
});
