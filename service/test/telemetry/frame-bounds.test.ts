import { afterEach, beforeEach, expect, test, vi } from 'vitest';
import { AxisPipeline } from '../../src/telemetry/axis-pipeline.js';
import { encodeFrame } from '../../src/telemetry/frame-codec.js';
import type { GatewayProgress } from '../../src/telemetry/gateway-progress.js';
import type { FrameAnswer, IntakeService } from '../../src/telemetry/intake.service.js';
import { bareAxis, bareGateway, bareIntake } from '../support/bare-intake.js';

const STEP_US = 1_000;
const SAMPLES = 100;
const BLOCK_US = SAMPLES * STEP_US;

let intake: IntakeService;
let gateway: GatewayProgress;
/** Time of the first sample of message 1, µs: now. */
let t0: number;

beforeEach(() => {
  intake = bareIntake();
  intake.pipelineFor(bareAxis(1));
  gateway = intake.progress(bareGateway(1));
  t0 = 1000 * Date.now();
});
afterEach(() => vi.restoreAllMocks());

const send = (sequence: number, startUs = t0 + (sequence - 1) * BLOCK_US): FrameAnswer =>
  intake.take(
    gateway,
    [1],
    encodeFrame({
      sequence,
      blocks: [
        {
          axisIndex: 0,
          motionEnabled: true,
          gapBefore: false,
          sampleTimeUs: STEP_US,
          startUs,
          target: new Int32Array(SAMPLES),
          position: new Int32Array(SAMPLES),
          output: new Int16Array(SAMPLES),
        },
      ],
    }),
  );
const refusedFor = (reason: string): unknown => ({
  rejected: expect.stringMatching(new RegExp(`^${reason}: .`)) as string,
  sequence: expect.any(Number) as number,
});
const lastUs = (): number => Math.round(1e6 * intake.pipeline(1)!.lastSampleAt!);

test('a time from the far future is refused, and what follows is taken', () => {
  send(1);
  expect(send(2, t0 + 3_600e6)).toEqual(refusedFor('time-ahead'));
  expect(send(2)).toEqual({ received: 2 });
  expect(lastUs()).toBe(t0 + 2 * BLOCK_US - STEP_US);
  expect(gateway.watch.droppedSamples).toBe(0);
  expect(Object.fromEntries(gateway.watch.refusals)).toEqual({ 'time-ahead': 1 });
});

test('a clock ahead by less than five minutes is taken, shown, and drops what is older when it is mended', () => {
  expect(send(1, t0 + 290e6)).toEqual({ received: 1 });
  expect(gateway.watch.clockOffset(Date.now())).toBeGreaterThan(289);
  expect(gateway.watch.clockOffset(Date.now())).toBeLessThan(291);
  expect(send(2, t0)).toEqual({ received: 2 });
  expect(gateway.watch.droppedSamples).toBe(SAMPLES);
});

test('the service’s own clock set back refuses nobody', () => {
  send(1);
  const real = Date.now();
  vi.spyOn(Date, 'now').mockReturnValue(real - 86_400_000);
  expect(send(2)).toEqual({ received: 2 });
});

test('a gateway’s clock set back: older samples are dropped and counted, newer ones taken again', () => {
  for (let sequence = 1; sequence <= 10; sequence++) send(sequence);
  // Half a second back: five blocks are not later than what is there.
  for (let sequence = 11; sequence <= 20; sequence++)
    expect(send(sequence, t0 + (sequence - 6) * BLOCK_US)).toEqual({ received: sequence });
  expect(gateway.watch.droppedSamples).toBe(5 * SAMPLES);
  expect(lastUs()).toBe(t0 + 15 * BLOCK_US - STEP_US);
});

test('a spoilt sequence is refused once, and what follows is no duplicate', () => {
  send(1);
  expect(send(2 ** 40, t0 + BLOCK_US)).toEqual(refusedFor('sequence-jump'));
  for (const sequence of [2, 3]) expect(send(sequence)).toEqual({ received: sequence });
  expect(gateway.watch).toMatchObject({ duplicates: 0, gaps: 0, droppedSamples: 0 });
  // Another spoilt number after a good message is asked for anew.
  expect(send(2 ** 40, t0 + 3 * BLOCK_US)).toEqual(refusedFor('sequence-jump'));
});

test('a gateway that lost many messages sends the next one again: one gap', () => {
  send(1);
  expect(send(5_000, t0 + BLOCK_US)).toEqual(refusedFor('sequence-jump'));
  expect(send(5_000, t0 + BLOCK_US)).toEqual({ received: 5_000 });
  expect(send(5_001, t0 + 2 * BLOCK_US)).toEqual({ received: 5_001 });
  expect(gateway.watch.gaps).toBe(1);
});

test('a step of up to a thousand is taken at once as a gap', () => {
  send(1);
  expect(send(1_001, t0 + BLOCK_US)).toEqual({ received: 1_001 });
  expect(send(2_002, t0 + 2 * BLOCK_US)).toEqual(refusedFor('sequence-jump'));
  expect(gateway.watch.gaps).toBe(1);
});

test('messages that change places: the later one leaves a gap, the earlier one counts as a duplicate', () => {
  send(1);
  send(3);
  expect(send(2)).toEqual({ received: 2 });
  expect(gateway.watch).toMatchObject({ duplicates: 1, gaps: 1, droppedSamples: 0 });
  expect(gateway.received).toBe(3);
});

test('a saved state with samples from the future goes on with what comes now', () => {
  const saved = new AxisPipeline(intake.pipeline(1)!.facts);
  saved.push({
    axisIndex: 0,
    motionEnabled: true,
    gapBefore: false,
    sampleTimeUs: STEP_US,
    startUs: t0 + 3_600e6,
    target: new Int32Array(SAMPLES),
    position: new Int32Array(SAMPLES),
    output: new Int16Array(SAMPLES),
  });
  const parts: Buffer[] = [];
  saved.image.writeChanged((_, bytes) => parts.push(Buffer.from(bytes)));
  const pipeline = intake.pipeline(1)!;
  expect(pipeline.restore(saved.changedJudgement()!, parts)).toBe(true);
  expect(pipeline.forgetFuture(t0 + 3_600e6 + BLOCK_US)).toBe(false);
  expect(pipeline.forgetFuture(t0 + 300e6)).toBe(true);
  expect(pipeline.heardAt).toBeNull();
  expect(send(1)).toEqual({ received: 1 });
  expect(gateway.watch.droppedSamples).toBe(0);
});
