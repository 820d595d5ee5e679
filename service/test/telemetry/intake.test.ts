import request from 'supertest';
import { afterAll, beforeAll, beforeEach, expect, test } from 'vitest';
import { IndicatorMinute, IndicatorSecond } from '../../src/indicators/indicator-rollup.entity.js';
import { encodeFrame, type FrameBlock } from '../../src/telemetry/frame-codec.js';
import { randomSource } from '../identification/test-axis.js';
import { commission, FakeGateway, type CommissionedAxis } from '../support/fake-gateway.js';
import { startService, until, type Caller, type Service } from '../support/start-service.js';

const STEP_US = 10_000;
const PER_SECOND = 1e6 / STEP_US;
const RESOLUTION = 0.005;
/** A whole second, some minutes ago. */
const T0 = Math.floor(Date.now() / 1000) - 600;

let service: Service;
let callers: { admin: Caller; engineer: Caller };
let axis: CommissionedAxis;
let gateway: FakeGateway;
const opened: FakeGateway[] = [];

beforeAll(async () => {
  service = await startService();
  callers = { admin: await service.as('admin'), engineer: await service.as('engineer') };
});
afterAll(() => service?.close());

// Each test has a gateway and an axis of its own.
beforeEach(async () => {
  opened.splice(0).forEach((old) => old.close());
  axis = await commission(callers, service.siteIds[0], {
    sampleTime: STEP_US / 1e6,
    resolution: RESOLUTION,
    pattern: { kind: 'triple', lambda: 8 },
  });
  gateway = await connect();
});

async function connect(token = axis.token): Promise<FakeGateway> {
  const made = await FakeGateway.connect(service.url, { token });
  opened.push(made);
  return made;
}

/** Samples of a wild signal: the target changes at every sample, so the axis moves all the time. */
function wild(seed: number, startUs: number, n: number, axisIndex = 0): FrameBlock {
  const random = randomSource(seed);
  const block: FrameBlock = {
    axisIndex,
    motionEnabled: true,
    gapBefore: false,
    sampleTimeUs: STEP_US,
    startUs,
    target: new Int32Array(n),
    position: new Int32Array(n),
    output: new Int16Array(n),
  };
  for (let i = 0; i < n; i++) {
    block.target[i] = 10_000 * i + Math.floor(4_000 * random());
    block.position[i] = block.target[i]! - 500 + Math.floor(1_000 * random());
    block.output[i] = Math.max(-10_000, Math.min(10_000, Math.round(25_000 * (random() - 0.5))));
  }
  return block;
}

const seconds = (axisId = axis.axisId): Promise<IndicatorSecond[]> =>
  service.dataSource.getRepository(IndicatorSecond).find({ where: { axisId }, order: { t: 'ASC' } });

test('hello answers the axes of the gateway’s site with index and running gains, and names unknown tags', async () => {
  const elsewhere = await commission(callers, service.siteIds[1]);
  const answer = await gateway.hello(['no such axis', axis.tag, elsewhere.tag, axis.tag], 'first');
  expect(answer.unknown).toEqual(['no such axis', elsewhere.tag]);
  expect(answer.durableSequence).toBe(0);
  expect(answer.axes).toHaveLength(1);
  const [known] = answer.axes;
  expect(known).toMatchObject({
    tag: axis.tag,
    index: 0,
    id: axis.axisId,
    resolution: RESOLUTION,
    revision: 1,
    structure: 'PI-D',
    maintenance: false,
  });
  // Triple pole λ = 8 on K = 12, α = 20: Kp = 3λ²/(Kα), Ki = λ³/(Kα), Kd = (3λ − α)/(Kα), Kv = 1/K + Kd, Ka = 1/(Kα)
  expect(known!.gains.kp).toBeCloseTo(192 / 240, 12);
  expect(known!.gains.ki).toBeCloseTo(512 / 240, 12);
  expect(known!.gains.kd).toBeCloseTo(4 / 240, 12);
  expect(known!.gains.kv).toBeCloseTo(1 / 12 + 4 / 240, 12);
  expect(known!.gains.ka).toBeCloseTo(1 / 240, 12);
});

test.each([
  ['no list', { axes: 'T-1', epoch: 'a' }],
  ['a number for a tag', { axes: [1], epoch: 'a' }],
  ['no epoch', { axes: [] }],
  ['an empty epoch', { axes: [], epoch: '' }],
  ['a number for the epoch', { axes: [], epoch: 7 }],
  ['nothing', null],
])('hello with %s is refused in words', async (_, body) => {
  expect(await gateway.ask('hello', body)).toEqual({ rejected: expect.stringMatching(/^bad-hello: /) });
});

test('the rows add up to what was sent, second by second', async () => {
  await gateway.hello([axis.tag], 'a');
  const blocks = [0, 1, 2].map((k) => wild(k + 1, (T0 + k) * 1e6, PER_SECOND));
  for (const [k, block] of blocks.entries())
    expect(await gateway.frame(k + 1, [block])).toEqual({ received: k + 1 });
  await gateway.frame(4, [wild(4, (T0 + 3) * 1e6, 1)]); // closes the third second
  await gateway.untilDurable(4);
  const rows = await seconds();
  expect(rows.map(({ t }) => t)).toEqual([T0, T0 + 1, T0 + 2]);
  for (const [k, { target, position, output }] of blocks.entries()) {
    const row = rows[k]!;
    const errors = Array.from(target, (r, i) => Math.abs(r - position[i]!) * RESOLUTION);
    const outputs = Array.from(output, (u) => u / 100);
    const squares = (values: number[]): number => values.reduce((sum, x) => sum + x * x, 0);
    expect(row.samples).toBe(PER_SECOND);
    expect(row.coveredSeconds).toBeCloseTo(1, 9);
    expect(Math.max(row.peakMovingError, row.peakStandingError)).toBeCloseTo(Math.max(...errors), 9);
    expect(row.sumSquaredMovingError + row.sumSquaredStandingError).toBeCloseTo(squares(errors), 6);
    expect(row.peakOutput).toBeCloseTo(Math.max(...outputs.map(Math.abs)), 9);
    expect(row.sumSquaredOutput).toBeCloseTo(squares(outputs), 6);
    expect(row.saturatedSamples).toBe(outputs.filter((u) => Math.abs(u) >= 99.9).length);
    // The very first sample has nothing before it to have moved from.
    expect(row.movingSamples).toBe(k === 0 ? PER_SECOND - 1 : PER_SECOND);
    expect(row.gaps).toBe(0);
  }
  // Minutes hold the same sums.
  const minutes = await service.dataSource.getRepository(IndicatorMinute).findBy({ axisId: axis.axisId });
  const total = (key: 'samples' | 'saturatedSamples', of: { [K in typeof key]: number }[]): number =>
    of.reduce((sum, row) => sum + row[key], 0);
  expect(total('samples', minutes)).toBe(3 * PER_SECOND);
  expect(total('saturatedSamples', minutes)).toBe(total('saturatedSamples', rows));
});

test('the same bytes sent twice count once, in a connection and across connections', async () => {
  await gateway.hello([axis.tag], 'a');
  const first = encodeFrame({ sequence: 1, blocks: [wild(1, T0 * 1e6, PER_SECOND)] });
  const second = encodeFrame({ sequence: 2, blocks: [wild(2, (T0 + 1) * 1e6, PER_SECOND + 1)] });
  const duplicates = await service.metric('polewright_frames_total{outcome="duplicate"}');
  for (const message of [first, first, second, first])
    expect(await gateway.send(message)).toHaveProperty('received');
  gateway.close();
  const again = await connect();
  expect((await again.hello([axis.tag], 'a')).axes).toHaveLength(1);
  for (const message of [first, second]) expect(await again.send(message)).toHaveProperty('received');
  await again.untilDurable(2);
  expect((await seconds()).map(({ samples }) => samples)).toEqual([PER_SECOND, PER_SECOND]);
  expect(await service.metric('polewright_frames_total{outcome="duplicate"}')).toBe(duplicates + 4);
});

test('a new epoch counts from 1 again; samples it repeats still count once', async () => {
  await gateway.hello([axis.tag], 'a');
  await gateway.frame(1, [wild(1, T0 * 1e6, PER_SECOND)]);
  await gateway.frame(2, [wild(2, (T0 + 1) * 1e6, 1)]);
  await gateway.untilDurable(2);
  expect((await gateway.hello([axis.tag], 'a')).durableSequence).toBe(2);
  expect((await gateway.hello([axis.tag], 'b')).durableSequence).toBe(0);
  gateway.durable = 0;
  await gateway.frame(1, [wild(1, T0 * 1e6, PER_SECOND)]);
  await gateway.frame(2, [wild(2, (T0 + 1) * 1e6, PER_SECOND + 1)]);
  await gateway.untilDurable(2);
  expect((await seconds()).map(({ samples }) => samples)).toEqual([PER_SECOND, PER_SECOND]);
});

test('a gap in sequence, in time or told by the gateway is recorded and never filled in', async () => {
  const before = await service.metric('polewright_sequence_gaps_total');
  await gateway.hello([axis.tag], 'a');
  await gateway.frame(1, [wild(1, T0 * 1e6, PER_SECOND / 2)]);
  // In time: a quarter of a second is missing.
  await gateway.frame(2, [wild(2, T0 * 1e6 + 750_000, PER_SECOND / 4)]);
  // In sequence: 3 is missing although the time goes on.
  await gateway.frame(4, [wild(3, (T0 + 1) * 1e6, PER_SECOND / 2)]);
  // Told: neither shows it.
  await gateway.frame(5, [{ ...wild(4, (T0 + 1) * 1e6 + 500_000, PER_SECOND / 2), gapBefore: true }]);
  await gateway.frame(6, [wild(5, (T0 + 2) * 1e6, 1)]);
  await gateway.untilDurable(6);
  const rows = await seconds();
  expect(rows.map(({ samples }) => samples)).toEqual([(3 * PER_SECOND) / 4, PER_SECOND]);
  // The gap in sequence lies between the two seconds: it is known before the second one opens.
  expect(rows.reduce((sum, { gaps }) => sum + gaps, 0)).toBe(3);
  expect(rows[0]!.coveredSeconds).toBeCloseTo(0.75, 9);
  expect(await service.metric('polewright_sequence_gaps_total')).toBe(before + 1);
});

test('a malformed message is refused whole with its reason, counted, and hurts nothing else', async () => {
  const other = await commission(callers, service.siteIds[0], { sampleTime: STEP_US / 1e6 });
  const neighbour = await connect(other.token);
  await neighbour.hello([other.tag], 'a');
  await gateway.hello([axis.tag], 'a');
  await gateway.frame(1, [wild(1, T0 * 1e6, PER_SECOND / 2)]);
  const good = wild(2, T0 * 1e6 + 500_000, PER_SECOND / 2);
  const bytes = encodeFrame({ sequence: 2, blocks: [good] });
  const magic = Uint8Array.from(bytes);
  magic[0] = 0;
  const bad: [string, unknown][] = [
    ['truncated', bytes.slice(0, bytes.byteLength - 8)],
    ['too-short', bytes.slice(0, 5)],
    ['wrong-magic', magic],
    ['not-binary', 'PWT1'],
    ['not-binary', { sequence: 2 }],
    // The first block is good, the second names an axis that hello did not give: neither counts.
    ['unknown-axis', encodeFrame({ sequence: 2, blocks: [good, { ...good, axisIndex: 1 }] })],
    ['wrong-sample-time', encodeFrame({ sequence: 2, blocks: [good, { ...good, sampleTimeUs: 5_000 }] })],
  ];
  for (const [reason, message] of bad) {
    const line = `polewright_frames_total{outcome="${reason}"}`;
    const counted = await service.metric(line);
    const answer = await gateway.send(message);
    expect(answer).toMatchObject({ rejected: expect.stringMatching(new RegExp(`^${reason}: .`)) as string });
    expect(await service.metric(line)).toBe(counted + 1);
    expect(await neighbour.frame(1, [wild(1, T0 * 1e6, 10)])).toEqual({ received: 1 });
  }
  // The refused sequence can still be sent rightly.
  expect(await gateway.send(bytes)).toEqual({ received: 2 });
  await gateway.frame(3, [wild(3, (T0 + 1) * 1e6, 1)]);
  await gateway.untilDurable(3);
  const [row, ...more] = await seconds();
  expect(more).toEqual([]);
  expect(row).toMatchObject({ samples: PER_SECOND, gaps: 0 });
});

test('frames before hello are refused', async () => {
  expect(await gateway.frame(1, [wild(1, T0 * 1e6, 10)])).toMatchObject({
    rejected: expect.stringMatching(/^unknown-axis: /) as string,
    sequence: 1,
  });
});

test('durable comes only after the rows are there', async () => {
  await gateway.hello([axis.tag], 'a');
  let rowsAtDurable: Promise<IndicatorSecond[]> | undefined;
  gateway.socket.on('durable', ({ sequence }: { sequence: number }) => {
    if (sequence >= 2) rowsAtDurable ??= seconds();
  });
  await gateway.frame(1, [wild(1, T0 * 1e6, PER_SECOND)]);
  await gateway.frame(2, [wild(2, (T0 + 1) * 1e6, 1)]);
  await gateway.untilDurable(2);
  expect((await rowsAtDurable)!.map(({ samples }) => samples)).toEqual([PER_SECOND]);
  // What hello says to the next connection is the same.
  gateway.close();
  expect((await (await connect()).hello([axis.tag], 'a')).durableSequence).toBe(2);
});

test.each([
  ['an unknown token', { token: 'no such token' }, /not known/],
  ['no token', {}, /token is needed/],
  ['a number for a token', { token: 12 }, /token is needed/],
])('%s is refused and counted', async (_, auth, words) => {
  const refused = await service.metric('polewright_gateway_refused_total');
  await expect(FakeGateway.connect(service.url, auth)).rejects.toThrow(words);
  expect(await service.metric('polewright_gateway_refused_total')).toBe(refused + 1);
  expect(await gateway.hello([axis.tag], 'a')).toHaveProperty('durableSequence');
});

test('of two connections with one token the newest stays', async () => {
  await gateway.hello([axis.tag], 'a');
  await gateway.frame(1, [wild(1, T0 * 1e6, PER_SECOND)]);
  const newer = await connect();
  await until('the former connection closes', () => gateway.closedBecause);
  await newer.hello([axis.tag], 'a');
  expect(await newer.frame(2, [wild(2, (T0 + 1) * 1e6, 1)])).toEqual({ received: 2 });
  await newer.untilDurable(2);
  expect((await seconds()).map(({ samples, gaps }) => [samples, gaps])).toEqual([[PER_SECOND, 0]]);
  // The closed one did not take the newer one's place away.
  const { body } = await callers.engineer.get('/api/v1/gateways').expect(200);
  const found = (body as { items: { id: number; connected: boolean }[] }).items.find(
    ({ id }) => id === axis.gatewayId,
  );
  expect(found).toMatchObject({ connected: true });
});

test('gains-applied of an axis that hello did not give, or without numbers, is refused', async () => {
  await gateway.hello([axis.tag], 'a');
  const gains = { kp: 1, ki: 1, kd: 0, kv: 0, ka: 0 };
  expect(await gateway.ask('gains-applied', { axisId: 1, revision: 1, gains })).toEqual({
    rejected: expect.stringMatching(/^unknown-axis/) as string,
  });
  const { axisId } = axis;
  for (const body of [
    { axisId, revision: '1', gains },
    { axisId, revision: 1 },
    { axisId, revision: 1, gains: { ...gains, kd: '0' } },
    { axisId, revision: 1, gains: { ...gains, ka: null } },
  ])
    expect(await gateway.ask('gains-applied', body)).toEqual({
      rejected: expect.stringMatching(/^bad-gains/) as string,
    });
});

test('a message beyond the size limit closes only its own connection', async () => {
  await gateway.hello([axis.tag], 'a');
  gateway.socket.emit('frames', new Uint8Array(4_500_000));
  await until('the connection closes', () => gateway.closedBecause);
  await request(service.url).get('/health/ready').expect(200);
  const again = await connect();
  await again.hello([axis.tag], 'a');
  expect(await again.frame(1, [wild(1, T0 * 1e6, 10)])).toEqual({ received: 1 });
});
