import { io, type Socket } from 'socket.io-client';
import { afterAll, beforeAll, expect, test, vi } from 'vitest';
import { LiveGateway } from '../../src/live/live.gateway.js';
import { commission, FakeGateway, type CommissionedAxis } from '../support/fake-gateway.js';
import { DEMO_PASSWORD, startService, until, type Service } from '../support/start-service.js';

const STEP_US = 2_000;
let service: Service;
let axis: CommissionedAxis;
let gateway: FakeGateway;
let token: string;
const pages: Socket[] = [];

interface Values {
  at: string;
  tiles: { id: number; seconds: number[][] }[];
  trace: { axisId: number; time: number[] } | null;
}

beforeAll(async () => {
  service = await startService();
  const callers = { admin: await service.as('admin'), engineer: await service.as('engineer') };
  axis = await commission(callers, service.siteIds[0], { sampleTime: STEP_US / 1e6 });
  gateway = await FakeGateway.connect(service.url, { token: axis.token });
  await gateway.hello([axis.tag], 'a');
  const { body } = await callers.engineer
    .post('/api/v1/auth/sign-in')
    .send({ email: 'engineer@tarnwick.example', password: DEMO_PASSWORD })
    .expect(200);
  token = (body as { accessToken: string }).accessToken;
});
afterAll(async () => {
  for (const page of pages) page.close();
  gateway?.close();
  await service?.close();
});

async function page(): Promise<Socket> {
  const socket = io(`${service.url}/live`, { auth: { token }, transports: ['websocket'], forceNew: true });
  pages.push(socket);
  await until('the page is connected', () => socket.connected);
  return socket;
}

const T0 = Math.floor(Date.now() / 1000) - 300;
let sequence = 0;
/** A second of samples. */
const second = async (): Promise<void> => {
  const n = 1e6 / STEP_US;
  const k = sequence++;
  await gateway.frame(sequence, [
    {
      axisIndex: 0,
      motionEnabled: true,
      gapBefore: false,
      sampleTimeUs: STEP_US,
      startUs: (T0 + k) * 1e6,
      target: Int32Array.from({ length: n }, (_, i) => i),
      position: new Int32Array(n),
      output: new Int16Array(n),
    },
  ]);
};

test('a page gets only what it shows, one message for all that came since the last, and the next after its answer', async () => {
  const live = service.app.get(LiveGateway);
  const quick = await page();
  const slow = await page();
  const got: Values[] = [];
  const slowGot: { values: Values; answer: () => void }[] = [];
  quick.on('values', (values: Values, answer: () => void) => {
    got.push(values);
    answer();
  });
  slow.on('values', (values: Values, answer: () => void) => slowGot.push({ values, answer }));
  for (const one of [quick, slow])
    await one.emitWithAck('watch', { axes: [axis.axisId], trace: axis.axisId, traceRate: 50 });
  await until('the slow page has its first', () => slowGot.length === 1);

  for (let k = 0; k < 6; k++) await second();
  await gateway.untilDurable(6);
  await until('the quick page has all five closed seconds', () => {
    const seconds = got.flatMap(({ tiles }) => tiles.flatMap((tile) => tile.seconds));
    return seconds.length === 5;
  });
  expect(new Set(got.flatMap(({ tiles }) => tiles.map(({ id }) => id)))).toEqual(new Set([axis.axisId]));
  // However often the beat comes, an unanswered page gets nothing more; then it gets the newest in one message.
  for (let k = 0; k < 5; k++) await live.send();
  expect(slowGot).toHaveLength(1);
  slowGot[0]!.answer();
  await until('the slow page has its second', () => slowGot.length === 2);
  const { tiles, trace } = slowGot[1]!.values;
  expect(tiles[0]!.seconds.map(([t]) => t)).toEqual([0, 1, 2, 3, 4].map((k) => T0 + k));
  // Six seconds at 50 points, of which the last five are kept.
  expect(trace!.axisId).toBe(axis.axisId);
  expect(trace!.time.length).toBeLessThanOrEqual(250);
  expect(trace!.time.at(-1)).toBeGreaterThan(T0 + 5);
});

test('a page gets at most two messages a second', async () => {
  const quick = await page();
  const times: number[] = [];
  quick.on('values', ({ at }: Values, answer: () => void) => {
    times.push(Date.parse(at));
    answer();
  });
  await quick.emitWithAck('watch', { fleet: true });
  await until('five messages', () => times.length >= 5);
  // By the service's own stamps; a late beat may be followed by one in time.
  expect(times[4]! - times[0]!).toBeGreaterThan(4 * 500 - 400);
});

test('a page that stalls is cut off and begins again with the newest', async () => {
  const live = service.app.get(LiveGateway);
  vi.spyOn(live, 'answerWithinMs', 'get').mockReturnValue(200);
  const stalled = await page();
  let connected = 0;
  stalled.on('connect', () => {
    connected++;
    stalled.emit('watch', { axes: [axis.axisId] });
  });
  let got = 0;
  stalled.on('values', (_: Values, answer: () => void) => {
    got++;
    // Answers only after it was cut off.
    if (connected > 0) answer();
  });
  await stalled.emitWithAck('watch', { axes: [axis.axisId] });
  await until('it is back', () => connected > 0);
  const before = got;
  await until('values come again', () => got > before);
  vi.restoreAllMocks();
});

test('who is not signed in gets no live values', async () => {
  const stranger = io(`${service.url}/live`, {
    auth: { token: 'no token' },
    transports: ['websocket'],
    forceNew: true,
  });
  pages.push(stranger);
  const refused = await new Promise<Error>((done) => stranger.once('connect_error', done));
  expect(refused.message).toBe('sign in first');
  expect(stranger.connected).toBe(false);
});
