import { beforeEach, expect, test } from 'vitest';
import { encodeFrame } from '../../src/telemetry/frame-codec.js';
import { IntakeLine, type GatewaySession } from '../../src/telemetry/intake-line.service.js';
import type { FrameAnswer, IntakeService } from '../../src/telemetry/intake.service.js';
import { Pace } from '../../src/telemetry/pace.js';
import { bareAxis, bareGateway, bareIntake } from '../support/bare-intake.js';

const SAMPLES = 2_000;
let intake: IntakeService;
let line: IntakeLine;
let t0: number;
const session = (id: number): GatewaySession => ({
  progress: intake.progress(bareGateway(id)),
  served: [id],
});
const message = (sequence: number): Uint8Array =>
  encodeFrame({
    sequence,
    blocks: [
      {
        axisIndex: 0,
        motionEnabled: true,
        gapBefore: false,
        sampleTimeUs: 1_000,
        startUs: t0 + sequence * SAMPLES * 1_000,
        target: new Int32Array(SAMPLES),
        position: new Int32Array(SAMPLES),
        output: new Int16Array(SAMPLES),
      },
    ],
  });
const nextTurn = (): Promise<void> => new Promise((done) => setImmediate(done));

beforeEach(() => {
  intake = bareIntake();
  line = new IntakeLine(intake);
  t0 = 1000 * (Date.now() - 86_400_000);
  for (const id of [1, 2]) intake.pipelineFor(bareAxis(id));
});

test('a gateway that sends a thousand messages at once is refused beyond its room, and does not starve another', async () => {
  const flood = session(1);
  const neighbour = session(2);
  const answers: FrameAnswer[] = [];
  let floodedBefore = -1;
  for (let sequence = 1; sequence <= 1_000; sequence++)
    line.offer(flood, message(sequence), (answer) => answers.push(answer));
  const refused = answers.length;
  expect(refused).toBeGreaterThan(0);
  for (const answer of answers)
    expect(answer).toEqual({ rejected: expect.stringMatching(/^busy: /) as string, sequence: null });
  expect(flood.progress.watch.refusals.get('busy')).toBe(refused);
  // What waits is bounded whatever comes.
  expect(line.load().bytes).toBeLessThan(17e6);

  line.offer(neighbour, message(1), (answer) => {
    expect(answer).toEqual({ received: 1 });
    floodedBefore = answers.length - refused;
  });
  while (line.load().messages > 0) await nextTurn();
  // One round: a quantum of the flood's messages went before.
  expect(floodedBefore).toBeGreaterThanOrEqual(0);
  expect(floodedBefore).toBeLessThan(10);
  // All that were let in were taken, in order.
  expect(answers.slice(refused)).toEqual(
    Array.from({ length: 1_000 - refused }, (_, k) => ({ received: k + 1 })),
  );
  expect(flood.progress.received).toBe(1_000 - refused);
  // The one that flooded is asked to slow down, the neighbour is not.
  expect(line.beat([1, 2])).toEqual([[1, 500]]);
  expect(line.keepEveryMs(2)).toBe(0);
});

test('what waits when a gateway greets anew is taken first', async () => {
  const flood = session(1);
  const answers: FrameAnswer[] = [];
  for (const sequence of [1, 2, 3]) line.offer(flood, message(sequence), (answer) => answers.push(answer));
  line.finish(1);
  expect(answers).toEqual([{ received: 1 }, { received: 2 }, { received: 3 }]);
  expect(line.load()).toMatchObject({ bytes: 0, messages: 0 });
  await nextTurn();
  expect(answers).toHaveLength(3);
});

test('what is no message is refused in its turn', async () => {
  const answers: FrameAnswer[] = [];
  line.offer(session(1), { sequence: 1 }, (answer) => answers.push(answer));
  await nextTurn();
  expect(answers).toEqual([{ rejected: expect.stringMatching(/^not-binary: /) as string, sequence: null }]);
});

test('the pace doubles while messages wait, and is let go in steps after calm beats', () => {
  const pace = new Pace();
  const beats = (waits: number[]): number[] =>
    waits.map((wait) => {
      pace.beat(wait, false);
      return pace.keepEveryMs;
    });
  expect(beats([10, 499, 501, 900, 900, 900, 900])).toEqual([0, 0, 500, 1_000, 2_000, 4_000, 4_000]);
  // 200 ms are neither behind nor calm: the count of calm beats begins anew.
  expect(beats([10, 10, 10, 10, 200, 10, 10, 10, 10])).toEqual(new Array(9).fill(4_000));
  expect(beats([10, 10, 10, 10, 10, 10])).toEqual([2_000, 2_000, 2_000, 2_000, 2_000, 1_000]);
  expect(pace.beat(0, true)).toBe(true);
  expect(pace.keepEveryMs).toBe(2_000);
});
