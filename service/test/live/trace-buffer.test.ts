import { expect, test } from 'vitest';
import { TRACE_RATE, TraceBuffer } from '../../src/live/trace-buffer.js';
import type { FrameBlock } from '../../src/telemetry/frame-codec.js';

const SAMPLE_TIME = 0.001;
const SECOND = 1 / SAMPLE_TIME;
const FACTS = { id: 7, resolution: 0.01, sampleTime: SAMPLE_TIME };

/** A second at rest with one peak of one sample up and one down. */
function block(second: number, up: number, down: number): FrameBlock {
  const position = new Int32Array(SECOND);
  position[up] = -500;
  position[down] = 300;
  return {
    axisIndex: 0,
    motionEnabled: true,
    gapBefore: false,
    sampleTimeUs: 1e6 * SAMPLE_TIME,
    startUs: 1e6 * second,
    target: new Int32Array(SECOND),
    position,
    output: new Int16Array(SECOND).fill(1_250),
  };
}

test.each([20, 90, 200, 777])('at %i points a second no more come, and both peaks are among them', (rate) => {
  const trace = new TraceBuffer(FACTS, rate);
  trace.push(block(100, 333, 878));
  const { axisId, time, target, position, output } = trace.take()!;
  expect(axisId).toBe(7);
  expect(time.length).toBeLessThanOrEqual(rate + 2);
  expect(Math.min(...position)).toBeCloseTo(-5, 9);
  expect(Math.max(...position)).toBeCloseTo(3, 9);
  expect(time[position.indexOf(Math.min(...position))]).toBeCloseTo(100.333, 6);
  expect(new Set(target)).toEqual(new Set([0]));
  expect(new Set(output)).toEqual(new Set([12.5]));
  // In the order of time, each point once.
  for (let i = 1; i < time.length; i++) expect(time[i]).toBeGreaterThan(time[i - 1]!);
});

test('a page that does not fetch keeps the newest seconds only', () => {
  const trace = new TraceBuffer(FACTS, 100);
  for (let second = 0; second < 60; second++) trace.push(block(second, 10, 900));
  const { time } = trace.take()!;
  // Five seconds at that rate; a flat stretch takes one point instead of two.
  expect(time.length).toBeLessThanOrEqual(500);
  expect(time[0]).toBeGreaterThan(60 - 2 * 5);
  expect(time.at(-1)).toBeGreaterThan(59.9);
  expect(trace.take()).toBeNull();
});

test('what a page may ask for is bounded', () => {
  const trace = new TraceBuffer({ ...FACTS, sampleTime: 0.0001 }, 1e9);
  const [one] = [block(0, 10, 900)];
  trace.push({ ...one!, sampleTimeUs: 100 });
  // A tenth of a second at 10 kHz.
  expect(trace.take()!.time.length).toBeLessThanOrEqual(TRACE_RATE.most / 10 + 2);
});
