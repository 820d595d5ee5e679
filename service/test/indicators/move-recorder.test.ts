import { describe, expect, test } from 'vitest';
import { MoveRecorder, type RecordedMove } from '../../src/indicators/move-recorder.js';

const STEP_US = 2_000;
const RESOLUTION = 0.01;
const T0_US = 1_700_000_000_000_000;

interface Stream {
  target: number[];
  /** target − position, counts */
  error?: (i: number) => number;
  output?: (i: number) => number;
}

/** A stand, a straight move of so many counts in so many samples, and a stand. */
const move = (counts: number, samples: number, before = 20, after = 100, from = 0): number[] => [
  ...new Array<number>(before).fill(from),
  ...Array.from({ length: samples }, (_, i) => from + Math.round((counts * (i + 1)) / samples)),
  ...new Array<number>(after).fill(from + counts),
];

function record(stream: Stream, blocks = 1, recorder = new MoveRecorder(RESOLUTION)): RecordedMove[] {
  const { target, error = () => 0, output = () => 0 } = stream;
  const moves: RecordedMove[] = [];
  const size = Math.ceil(target.length / blocks);
  for (let from = 0; from < target.length; from += size) {
    const part = target.slice(from, from + size);
    recorder.push(
      Int32Array.from(part),
      Int32Array.from(part, (r, i) => r - error(from + i)),
      Int16Array.from(part, (_, i) => output(from + i)),
      T0_US + from * STEP_US,
      STEP_US,
      0,
      (done) => moves.push(done),
    );
  }
  return moves;
}

describe('a move', () => {
  test('has the distance, duration and start of its target', () => {
    const [forth, back, ...more] = record({
      target: [...move(5_000, 250), ...move(-5_000, 400, 0, 100, 5_000)],
    });
    expect(more).toEqual([]);
    expect(forth!.distance).toBeCloseTo(50, 12);
    expect(forth!.duration).toBeCloseTo(0.5, 9);
    // From the last sample at rest.
    expect(forth!.t).toBeCloseTo((T0_US + 19 * STEP_US) / 1e6, 6);
    expect(back!.distance).toBeCloseTo(-50, 12);
    expect(back!.duration).toBeCloseTo(0.8, 9);
  });

  test('has the peak and RMS of its error and its share at the limit, settling included', () => {
    // The error is 8 counts throughout, and 40 once, 0.1 s after the target stopped; the output is at its limit 1 in 5.
    const late = 20 + 250 + 50;
    const target = move(5_000, 250, 20, 400);
    const [only] = record({
      target,
      error: (i) => (i === late ? 40 : 8),
      output: (i) => (i % 5 === 0 ? -9_990 : 9_989),
    });
    // 250 samples of the target's changes, then 0.15 s = 75 more.
    const samples = 250 + 75;
    expect(only!.peakError).toBeCloseTo(0.4, 12);
    expect(only!.rmsError).toBeCloseTo(0.01 * Math.sqrt((64 * (samples - 1) + 1_600) / samples), 9);
    expect(only!.saturatedPct).toBeCloseTo(20, 9);
  });

  test('is not ended by a pause of the target shorter than 0.15 s', () => {
    const [one, ...more] = record({
      target: [...move(1_000, 50, 20, 70), ...move(1_000, 50, 0, 100, 1_000)],
    });
    expect(more).toEqual([]);
    expect(one!.distance).toBeCloseTo(20, 12);
    expect(one!.duration).toBeCloseTo((50 + 70 + 50) * 0.002, 9);
  });

  test('of fewer than 50 counts is a jog', () => {
    expect(record({ target: move(49, 25) })).toEqual([]);
    expect(record({ target: move(-50, 25) })).toHaveLength(1);
    // Away and back again is no distance either.
    expect(record({ target: [...move(900, 25, 20, 0), ...move(-900, 25, 0, 100, 900)] })).toEqual([]);
  });

  test('is the same however the stream is cut', () => {
    const stream: Stream = {
      target: [...move(5_000, 250), ...move(-3_000, 100, 0, 100, 5_000)],
      error: (i) => i % 17,
      output: (i) => (i % 300) * 40 - 2_000,
    };
    const whole = record(stream);
    expect(whole).toHaveLength(2);
    for (const blocks of [2, 3, 7, 50, stream.target.length]) expect(record(stream, blocks)).toEqual(whole);
  });
});

test('a gap drops the move that it interrupts and only that one', () => {
  const recorder = new MoveRecorder(RESOLUTION);
  expect(record({ target: move(5_000, 250, 20, 0) }, 1, recorder)).toEqual([]);
  expect(recorder.standing).toBe(false);
  recorder.gap();
  expect(recorder.standing).toBe(true);
  // The rest of the move comes after the gap: its stand alone is no move, the next one is.
  const after = record(
    { target: [...new Array<number>(100).fill(5_000), ...move(-5_000, 250, 0, 100, 5_000)] },
    1,
    recorder,
  );
  expect(after.map(({ distance }) => Math.round(distance))).toEqual([-50]);
});
