import { register } from 'prom-client';
import { expect, test } from 'vitest';
import { encodeFrame, type FrameBlock } from '../../src/telemetry/frame-codec.js';
import type { IntakeService } from '../../src/telemetry/intake.service.js';
import { randomSource } from '../identification/test-axis.js';
import { bareAxis, bareGateway, bareIntake } from '../support/bare-intake.js';

const MESSAGES = 100_000;
const STEP_US = 1_000;
const SAMPLES = 8;

/** What the counter of messages says, by outcome. */
async function outcomes(): Promise<Map<string, number>> {
  const { values } = await register.getSingleMetric('polewright_frames_total')!.get();
  return new Map(values.map(({ labels, value }) => [String(labels.outcome), value]));
}

test('100 000 spoilt messages: each is taken or refused by name and counted, and a neighbour sees nothing of them', async () => {
  const intake = bareIntake();
  const random = randomSource(5);
  const below = (n: number): number => Math.floor(n * random());
  const block = (axisIndex: number, sequence: number): FrameBlock => ({
    axisIndex,
    motionEnabled: true,
    gapBefore: false,
    sampleTimeUs: STEP_US,
    startUs: 1.7e15 + sequence * SAMPLES * STEP_US,
    target: Int32Array.from({ length: SAMPLES }, () => below(1e6)),
    position: Int32Array.from({ length: SAMPLES }, () => below(1e6)),
    output: Int16Array.from({ length: SAMPLES }, () => below(20_001) - 10_000),
  });
  const spoil = (bytes: Uint8Array): Uint8Array => {
    const kind = below(8);
    if (kind === 0) return bytes.subarray(0, below(bytes.length));
    if (kind === 1) return Uint8Array.from([...bytes, ...new Uint8Array(1 + below(9))]);
    if (kind === 2) return Uint8Array.from({ length: below(200) }, () => below(256));
    // The headers are where it matters: half of the flips go there.
    for (let flips = 1 + below(4); flips > 0; flips--)
      bytes[below(random() < 0.5 ? 40 : bytes.length)] = below(256);
    return bytes;
  };

  for (const id of [1, 2, 3]) intake.pipelineFor(bareAxis(id));
  const hostile = intake.progress(bareGateway(1));
  const neighbour = intake.progress(bareGateway(2));
  // The same frames to an intake of its own, without the hostile gateway.
  const alone = bareIntake();
  alone.pipelineFor(bareAxis(3));
  const undisturbed = alone.progress(bareGateway(2));

  const before = await outcomes();
  const seen = new Map<string, number>();
  // Counted, not expected one by one: a hundred thousand expectations take longer than the messages.
  let moved = 0;
  let refusedNeighbours = 0;
  let neighbours = 0;
  for (let m = 1; m <= MESSAGES; m++) {
    const message = spoil(encodeFrame({ sequence: m, blocks: [block(0, m), block(1, m)] }));
    const lastTaken = hostile.received;
    const answer = intake.take(hostile, [1, 2], message);
    let outcome: string;
    if ('received' in answer) outcome = answer.received <= lastTaken ? 'duplicate' : 'taken';
    else outcome = answer.rejected.split(':')[0]!;
    seen.set(outcome, (seen.get(outcome) ?? 0) + 1);
    if (outcome !== 'taken') {
      if (hostile.received !== lastTaken) moved++;
      // A sequence spoilt by less than a jump is taken and would make the next ones duplicates.
    } else hostile.received = m;
    if (m % 10 === 0) {
      const good = encodeFrame({ sequence: ++neighbours, blocks: [block(0, neighbours)] });
      const taken = intake.take(neighbour, [3], good);
      if (!('received' in taken) || taken.received !== neighbours) refusedNeighbours++;
      alone.take(undisturbed, [3], good);
    }
  }
  expect(moved).toBe(0);
  expect(refusedNeighbours).toBe(0);
  expect(seen.has('internal-error')).toBe(false);
  // Every way of spoiling was met.
  for (const reason of [
    'taken',
    'truncated',
    'trailing-bytes',
    'too-short',
    'wrong-magic',
    'wrong-version',
    'bad-sequence',
    'no-samples',
    'bad-sample-time',
    'wrong-sample-time',
    'bad-time',
    'bad-output',
    'unknown-axis',
    'time-ahead',
    'sequence-jump',
  ])
    expect(seen.get(reason) ?? 0, reason).toBeGreaterThan(0);
  const after = await outcomes();
  const counted = (outcome: string): number => (after.get(outcome) ?? 0) - (before.get(outcome) ?? 0);
  for (const [outcome, times] of seen)
    expect(counted(outcome), outcome).toBe(times + (outcome === 'taken' ? 2 * neighbours : 0));
  const stateOf = (service: IntakeService): Float64Array[] => {
    const { seconds, moves, identifier } = service.pipeline(3)!;
    return [seconds.state, moves.state, identifier.state];
  };
  expect(stateOf(intake)).toEqual(stateOf(alone));
  expect(intake.pipeline(3)!.closedSeconds).toEqual(alone.pipeline(3)!.closedSeconds);
});
