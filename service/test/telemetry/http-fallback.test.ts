import request, { type Test } from 'supertest';
import { afterAll, beforeAll, beforeEach, expect, test } from 'vitest';
import { IndicatorSecond } from '../../src/indicators/indicator-rollup.entity.js';
import { encodeFrame, type FrameBlock } from '../../src/telemetry/frame-codec.js';
import { commission, FakeGateway, type CommissionedAxis, type HelloAnswer } from '../support/fake-gateway.js';
import { startService, until, type Caller, type Service } from '../support/start-service.js';

const STEP_US = 10_000;
const PER_SECOND = 1e6 / STEP_US;
const T0 = Math.floor(Date.now() / 1000) - 600;

let service: Service;
let callers: { admin: Caller; engineer: Caller };
let axis: CommissionedAxis;
let gateway: FakeGateway | undefined;

beforeAll(async () => {
  service = await startService();
  callers = { admin: await service.as('admin'), engineer: await service.as('engineer') };
});
afterAll(async () => {
  gateway?.close();
  await service?.close();
});
beforeEach(async () => {
  axis = await commission(callers, service.siteIds[0], { sampleTime: STEP_US / 1e6 });
});

const block = (startUs: number, n = PER_SECOND): FrameBlock => ({
  axisIndex: 0,
  motionEnabled: true,
  gapBefore: false,
  sampleTimeUs: STEP_US,
  startUs,
  target: Int32Array.from({ length: n }, (_, i) => 100 * i),
  position: new Int32Array(n),
  output: new Int16Array(n),
});
const asGateway = (method: 'get' | 'post', path: string, token = axis.token): Test =>
  request(service.url)[method](`/api/v1/telemetry/${path}`).set('Authorization', `Bearer ${token}`);
const send = (bytes: Uint8Array): Test =>
  asGateway('post', 'frames').set('Content-Type', 'application/octet-stream').send(Buffer.from(bytes));
const hello = (epoch = 'a'): Test => asGateway('post', 'hello').send({ axes: [axis.tag], epoch });

test('the same bytes get the same answers as by the socket, and become the same rows', async () => {
  const greeted = (await hello().expect(200)).body as HelloAnswer;
  expect(greeted).toMatchObject({ durableSequence: 0, unknown: [], axes: [{ tag: axis.tag, index: 0 }] });
  const first = encodeFrame({ sequence: 1, blocks: [block(T0 * 1e6)] });
  expect((await send(first).expect(200)).body).toEqual({ received: 1 });
  expect((await send(first).expect(200)).body).toEqual({ received: 1 });
  expect((await send(first.subarray(0, 50)).expect(200)).body).toEqual({
    rejected: expect.stringMatching(/^truncated: /) as string,
    sequence: null,
  });
  const second = encodeFrame({ sequence: 2, blocks: [block((T0 + 1) * 1e6, 1)] });
  expect((await send(second).expect(200)).body).toEqual({ received: 2 });
  await until(
    'durable',
    async () => ((await asGateway('get', 'durable')).body as { sequence: number }).sequence === 2,
  );
  expect(
    await service.dataSource.getRepository(IndicatorSecond).findBy({ axisId: axis.axisId }),
  ).toMatchObject([{ t: T0, samples: PER_SECOND }]);

  // The newest way wins: a socket ends the session by HTTP, and the other way about.
  gateway = await FakeGateway.connect(service.url, { token: axis.token });
  expect((await gateway.hello([axis.tag], 'a')).durableSequence).toBe(2);
  expect((await send(second)).body).toMatchObject({
    rejected: expect.stringMatching(/^no-hello: /) as string,
  });
  await hello().expect(200);
  await until('the socket closes', () => gateway!.closedBecause);
  expect((await send(encodeFrame({ sequence: 3, blocks: [block((T0 + 1) * 1e6 + STEP_US)] }))).body).toEqual({
    received: 3,
  });
});

test('who is no gateway is refused, and bad input is a problem with its path', async () => {
  for (const token of ['', 'no such token'])
    for (const path of ['hello', 'frames']) await asGateway('post', path, token).send({}).expect(401);
  const refused = await asGateway('post', 'frames', 'no such token').expect(401);
  expect(refused.headers['content-type']).toMatch('application/problem+json');
  // A person's token is no gateway's, and a gateway's opens nothing else.
  await callers.engineer.get('/api/v1/telemetry/durable').expect(401);
  await request(service.url).get('/api/v1/axes').set('Authorization', `Bearer ${axis.token}`).expect(401);
  const bad = await asGateway('post', 'hello').send({ axes: 'T-1', epoch: '' }).expect(400);
  expect((bad.body as { errors: { path: string }[] }).errors.map(({ path }) => path)).toEqual(
    expect.arrayContaining(['axes', 'epoch']),
  );
  await hello().expect(200);
  await send(new Uint8Array(4_000_001)).expect(413);
  expect((await asGateway('post', 'frames').send({ sequence: 1 }).expect(200)).body).toMatchObject({
    rejected: expect.stringMatching(/^not-binary: /) as string,
  });
});

test('the intake page’s figures: who is connected, rates, gaps, clock, refusals', async () => {
  const nowUs = 1000 * Date.now();
  await hello().expect(200);
  await send(encodeFrame({ sequence: 1, blocks: [block(nowUs - 2e6 + 60e6)] })).expect(200);
  await send(encodeFrame({ sequence: 3, blocks: [block(nowUs - 1e6 + 60e6)] })).expect(200);
  await send(encodeFrame({ sequence: 4, blocks: [block(nowUs - 0.5e6 + 60e6)] })).expect(200);
  await send(encodeFrame({ sequence: 5, blocks: [block(nowUs + 900e6)] })).expect(200);
  const { body } = await callers.engineer.get('/api/v1/intake').expect(200);
  const { gateways, ...all } = body as { gateways: Record<string, unknown>[] } & Record<string, unknown>;
  expect(all).toMatchObject({ queueBytes: 0, queueMessages: 0, failedCheckpoints: 0 });
  const own = gateways.find(({ id }) => id === axis.gatewayId)!;
  expect(own).toMatchObject({
    via: 'http',
    axes: 1,
    gaps: 1,
    duplicates: 0,
    droppedSamples: PER_SECOND / 2,
    refusals: [{ reason: 'time-ahead', count: 1 }],
    keepEveryMs: 0,
  });
  // The newest sample is stamped a minute ahead, less what the test took.
  expect(own.clockOffset).toBeGreaterThan(50);
  expect(own.clockOffset).toBeLessThanOrEqual(60.5);
  expect(own.lag).toBeLessThan(-40);
  await (await service.as('viewer')).get('/api/v1/intake').expect(403);
  await request(service.url).get('/api/v1/intake').expect(401);
});
