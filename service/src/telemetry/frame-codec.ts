/**
 * The telemetry frame: one binary message that carries samples of several axes.
 *
 * Little-endian, every part aligned to 4 bytes:
 *
 * | bytes | field |
 * | --- | --- |
 * | 0 | magic u32 `0x31545750` ("PWT1") |
 * | 4 | version u16, 1 |
 * | 6 | block count u16 |
 * | 8 | sequence u64: 1, 2, 3 … within a gateway's epoch |
 *
 * then for each block:
 *
 * | bytes | field |
 * | --- | --- |
 * | 0 | axis index u16 (from the answer to `hello`) |
 * | 2 | flags u16: bit 0 motion enabled, bit 1 gap before this block |
 * | 4 | sample count n u32 |
 * | 8 | sample time u32, µs |
 * | 12 | reserved u32, 0 |
 * | 16 | time of the first sample i64, µs since the Unix epoch |
 * | 24 | target i32[n], counts of the axis's resolution |
 * | | position i32[n], counts |
 * | | output i16[n], 0.01 % of full scale, padded to 4 bytes |
 *
 * This file is the package export `@polewright/service/frame-codec`; it imports nothing.
 */

export const FRAME_MAGIC = 0x31545750;
export const FRAME_VERSION = 1;
export const FLAG_MOTION_ENABLED = 1;
export const FLAG_GAP_BEFORE = 2;
/** Largest message a service accepts, bytes. */
export const MAX_FRAME_BYTES = 4_000_000;
/** Largest sample time a block may state, µs: 10 s. */
export const MAX_SAMPLE_TIME_US = 10_000_000;

const HEADER_BYTES = 16;
const BLOCK_HEADER_BYTES = 24;

/** One axis's samples inside a frame. Decoded arrays are views on the message: copy what must outlive it. */
export interface FrameBlock {
  axisIndex: number;
  motionEnabled: boolean;
  gapBefore: boolean;
  /** Sample time, µs. */
  sampleTimeUs: number;
  /** Time of the first sample, µs since the Unix epoch. */
  startUs: number;
  /** Counts of the axis's resolution, length n. */
  target: Int32Array;
  /** Counts of the axis's resolution, length n. */
  position: Int32Array;
  /** 0.01 % of full scale, length n. */
  output: Int16Array;
}

export interface Frame {
  sequence: number;
  blocks: FrameBlock[];
}

/** Why a frame is refused; the reason is a stable word for counters, the message says what and where. */
export class FrameError extends Error {
  constructor(
    readonly reason:
      | 'not-binary'
      | 'too-long'
      | 'too-short'
      | 'wrong-magic'
      | 'wrong-version'
      | 'bad-sequence'
      | 'truncated'
      | 'trailing-bytes'
      | 'no-samples'
      | 'bad-sample-time'
      | 'bad-time'
      | 'bad-output',
    message: string,
  ) {
    super(message);
    this.name = 'FrameError';
  }
}

const pad4 = (bytes: number): number => (bytes + 3) & ~3;

/** Bytes that a block of n samples takes in a frame. */
export const blockBytes = (n: number): number => BLOCK_HEADER_BYTES + 8 * n + pad4(2 * n);

/**
 * Writes a frame.
 *
 * @param frame sequence ≥ 1 and blocks whose three arrays have the same length n ≥ 1
 * @returns the message's bytes
 * @throws RangeError where arrays of one block differ in length
 */
export function encodeFrame(frame: Frame): Uint8Array {
  let size = HEADER_BYTES;
  for (const block of frame.blocks) size += blockBytes(block.target.length);
  const bytes = new Uint8Array(size);
  const view = new DataView(bytes.buffer);
  view.setUint32(0, FRAME_MAGIC, true);
  view.setUint16(4, FRAME_VERSION, true);
  view.setUint16(6, frame.blocks.length, true);
  view.setBigUint64(8, BigInt(frame.sequence), true);
  let at = HEADER_BYTES;
  for (const block of frame.blocks) {
    const n = block.target.length;
    if (block.position.length !== n || block.output.length !== n)
      throw new RangeError(`block of axis ${block.axisIndex}: target, position and output differ in length`);
    view.setUint16(at, block.axisIndex, true);
    view.setUint16(
      at + 2,
      (block.motionEnabled ? FLAG_MOTION_ENABLED : 0) | (block.gapBefore ? FLAG_GAP_BEFORE : 0),
      true,
    );
    view.setUint32(at + 4, n, true);
    view.setUint32(at + 8, block.sampleTimeUs, true);
    view.setBigInt64(at + 16, BigInt(block.startUs), true);
    at += BLOCK_HEADER_BYTES;
    new Int32Array(bytes.buffer, at, n).set(block.target);
    new Int32Array(bytes.buffer, at + 4 * n, n).set(block.position);
    new Int16Array(bytes.buffer, at + 8 * n, n).set(block.output);
    at += 8 * n + pad4(2 * n);
  }
  return bytes;
}

/**
 * Reads a frame whole or refuses it whole. The sample arrays are views on the message's own memory; only a message
 * that does not start on a 4-byte boundary is copied once first.
 *
 * @param message the bytes received
 * @throws FrameError with the reason and the place
 */
export function decodeFrame(message: Uint8Array): Frame {
  if (!(message instanceof Uint8Array)) throw new FrameError('not-binary', 'the message is not binary');
  if (message.byteLength > MAX_FRAME_BYTES)
    throw new FrameError('too-long', `${message.byteLength} bytes, at most ${MAX_FRAME_BYTES} are accepted`);
  if (message.byteLength < HEADER_BYTES)
    throw new FrameError('too-short', `${message.byteLength} bytes, the header alone takes ${HEADER_BYTES}`);
  // Not slice(): a Node Buffer's slice shares its memory and stays where it is.
  const bytes = message.byteOffset % 4 === 0 ? message : Uint8Array.from(message);
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  if (view.getUint32(0, true) !== FRAME_MAGIC)
    throw new FrameError(
      'wrong-magic',
      `magic 0x${view.getUint32(0, true).toString(16)}, expected 0x31545750`,
    );
  if (view.getUint16(4, true) !== FRAME_VERSION)
    throw new FrameError('wrong-version', `version ${view.getUint16(4, true)}, this service reads version 1`);
  const sequence = Number(view.getBigUint64(8, true));
  if (!Number.isSafeInteger(sequence) || sequence < 1)
    throw new FrameError('bad-sequence', `sequence ${sequence} is not a whole number from 1 to 2^53 - 1`);
  const count = view.getUint16(6, true);
  const blocks = new Array<FrameBlock>(count);
  let at = HEADER_BYTES;
  for (let b = 0; b < count; b++) {
    if (at + BLOCK_HEADER_BYTES > bytes.byteLength)
      throw new FrameError('truncated', `the message ends inside the header of block ${b}`);
    const n = view.getUint32(at + 4, true);
    if (n === 0) throw new FrameError('no-samples', `block ${b} has no samples`);
    if (n > MAX_FRAME_BYTES || at + blockBytes(n) > bytes.byteLength)
      throw new FrameError('truncated', `block ${b} announces ${n} samples, the message ends before them`);
    const sampleTimeUs = view.getUint32(at + 8, true);
    if (sampleTimeUs === 0 || sampleTimeUs > MAX_SAMPLE_TIME_US)
      throw new FrameError(
        'bad-sample-time',
        `block ${b}: sample time ${sampleTimeUs} µs is not in 1 … 10 000 000`,
      );
    const startUs = Number(view.getBigInt64(at + 16, true));
    if (!Number.isSafeInteger(startUs) || startUs < 0)
      throw new FrameError(
        'bad-time',
        `block ${b}: first sample time ${startUs} µs is not a time since 1970`,
      );
    const flags = view.getUint16(at + 2, true);
    const axisIndex = view.getUint16(at, true);
    at += BLOCK_HEADER_BYTES;
    const offset = bytes.byteOffset + at;
    const output = new Int16Array(bytes.buffer, offset + 8 * n, n);
    for (let i = 0; i < n; i++)
      if (output[i]! > 10_000 || output[i]! < -10_000)
        throw new FrameError(
          'bad-output',
          `block ${b}, sample ${i}: output ${output[i]! / 100} % is outside ±100 %`,
        );
    blocks[b] = {
      axisIndex,
      motionEnabled: (flags & FLAG_MOTION_ENABLED) !== 0,
      gapBefore: (flags & FLAG_GAP_BEFORE) !== 0,
      sampleTimeUs,
      startUs,
      target: new Int32Array(bytes.buffer, offset, n),
      position: new Int32Array(bytes.buffer, offset + 4 * n, n),
      output,
    };
    at += 8 * n + pad4(2 * n);
  }
  if (at !== bytes.byteLength)
    throw new FrameError('trailing-bytes', `${bytes.byteLength - at} bytes after the last block`);
  return { sequence, blocks };
}
