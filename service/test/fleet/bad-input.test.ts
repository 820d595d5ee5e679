import { JwtService } from '@nestjs/jwt';
import request from 'supertest';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { commission } from '../support/fake-gateway.js';
import { startService, type Caller, type Service } from '../support/start-service.js';

let service: Service;
let engineer: Caller;
let admin: Caller;
let machineId: number;

beforeAll(async () => {
  service = await startService();
  engineer = await service.as('engineer');
  admin = await service.as('admin');
  const machine = await engineer
    .post('/api/v1/machines')
    .send({ siteId: service.siteIds[0], name: 'Bench' })
    .expect(201);
  machineId = (machine.body as { id: number }).id;
});
afterAll(() => service?.close());

const sheet = (): Record<string, unknown> => ({
  machineId,
  tag: `B-${Math.random()}`,
  name: 'Slide',
  actuator: 'electric',
  resolution: 0.01,
  sampleTime: 0.002,
  travel: { min: 0, max: 500 },
  structure: 'PI-D',
  pattern: { kind: 'triple', lambda: 30 },
  feedForward: true,
  baseline: { gain: 12, pole: 20 },
  tolerances: { followingError: 2, gainPct: 15, polePct: 20, saturatedPct: 5 },
  move: { distance: 250, duration: 0.9 },
});

interface Problem {
  title: string;
  status: number;
  detail: string;
  errors?: { path: string; message: string }[];
}

function problemOf(answer: request.Response, status: number): Problem {
  expect(answer.status).toBe(status);
  expect(answer.headers['content-type']).toMatch(/^application\/problem\+json/);
  const problem = answer.body as Problem;
  expect(problem).toMatchObject({ status, title: expect.any(String) as string });
  return problem;
}

describe('a body that is not what it must be is refused by field, and nothing is made', () => {
  test.each<[string, Record<string, unknown>, string]>([
    ['a string for a number', { sampleTime: '0.002' }, 'sampleTime'],
    ['a number for a string', { name: 5 }, 'name'],
    ['a string for a number inside', { baseline: { gain: '12', pole: 20 } }, 'baseline.gain'],
    ['a negative pole', { baseline: { gain: 12, pole: -20 } }, 'baseline.pole'],
    ['no tolerances', { tolerances: undefined }, 'tolerances'],
    ['an unknown structure', { structure: 'PD' }, 'structure'],
    ['a word for yes', { feedForward: 'true' }, 'feedForward'],
    ['a field nobody knows', { colour: 'red' }, 'colour'],
    ['travel that ends before it begins', { travel: { min: 5, max: 5 } }, 'travel.max'],
    ['a sample time of none', { sampleTime: 0 }, 'sampleTime'],
    ['nothing for a number', { resolution: null }, 'resolution'],
    ['a list for an object', { move: [1, 2] }, 'move'],
    ['a machine that is none', { machineId: 999_999 }, 'machineId'],
    ['neither gains nor baseline', { baseline: undefined }, 'gains'],
  ])('%s', async (_, change, field) => {
    const before = await service.dataSource.query('SELECT count(*) AS n FROM "axis"');
    const { errors } = problemOf(await engineer.post('/api/v1/axes').send({ ...sheet(), ...change }), 400);
    expect(errors!.map((error) => error.path).some((at) => at === field || at.startsWith(`${field}.`))).toBe(
      true,
    );
    expect(errors!.every(({ message }) => message.length > 0)).toBe(true);
    expect(await service.dataSource.query('SELECT count(*) AS n FROM "axis"')).toEqual(before);
  });

  test('broken JSON, and a body of the wrong kind', async () => {
    const send = (body: string): request.Test =>
      engineer.post('/api/v1/axes').set('content-type', 'application/json').send(body);
    problemOf(await send('{"machineId": 1,'), 400);
    problemOf(await send('[]'), 400);
    problemOf(await send('null'), 400);
    // JSON has numbers beyond the largest double.
    const infinite = JSON.stringify(sheet()).replace('"resolution":0.01', '"resolution":1e999');
    expect(problemOf(await send(infinite), 400).errors!.map(({ path }) => path)).toContain('resolution');
  });

  test('the same sheet without a fault is taken, and its tag only once', async () => {
    const good = sheet();
    await engineer.post('/api/v1/axes').send(good).expect(201);
    problemOf(await engineer.post('/api/v1/axes').send(good), 409);
  });
});

test('a path or query that is no number is refused, a thing that is not there is not found', async () => {
  problemOf(await engineer.get('/api/v1/axes/abc'), 400);
  problemOf(await engineer.get('/api/v1/axes/1e999'), 400);
  problemOf(await engineer.get('/api/v1/axes?siteId=one'), 400);
  problemOf(await engineer.get('/api/v1/axes?limit=0'), 400);
  problemOf(await engineer.get('/api/v1/axes?cursor=-1'), 400);
  problemOf(await engineer.get('/api/v1/axes?state=broken'), 400);
  problemOf(await engineer.get('/api/v1/axes/999999'), 404);
  problemOf(await engineer.get('/api/v1/proposals/999999'), 404);
  problemOf(await engineer.get('/api/v1/nowhere'), 404);
});

describe('a token', () => {
  const me = (token: string | null): request.Test => {
    const ask = request(service.url).get('/api/v1/auth/me');
    return token === null ? ask : ask.set('Authorization', `Bearer ${token}`);
  };
  const claims = async (): Promise<Record<string, unknown>> => {
    const { body } = await request(service.url)
      .post('/api/v1/auth/sign-in')
      .send({ email: 'viewer@tarnwick.example', password: 'polewright-demo' })
      .expect(200);
    const { accessToken } = body as { accessToken: string };
    await me(accessToken).expect(200);
    const decoded = service.app
      .get(JwtService, { strict: false })
      .decode<Record<string, unknown>>(accessToken);
    const signed = new Set(['iat', 'exp', 'iss', 'aud']); // put in by signing again
    return Object.fromEntries(Object.entries(decoded).filter(([name]) => !signed.has(name)));
  };

  test('that is missing, garbage, unsigned, of another secret or expired opens nothing', async () => {
    const jwt = service.app.get(JwtService, { strict: false });
    const payload = await claims();
    const good = await jwt.signAsync(payload, { expiresIn: '1m' });
    await me(good).expect(200);
    const [head, body, signature] = good.split('.') as [string, string, string];
    const none = Buffer.from('{"alg":"none","typ":"JWT"}').toString('base64url');
    for (const token of [
      null,
      '',
      'garbage',
      `${head}.${body}`,
      `${head}.${body}.${signature.slice(0, -4)}AAAA`,
      `${none}.${body}.`,
      await jwt.signAsync(payload, { secret: 'another one', expiresIn: '1m' }),
      await jwt.signAsync(payload, { expiresIn: '-1s' }),
    ])
      problemOf(await me(token), 401);
    for (const path of ['axes', 'alerts', 'proposals', 'sites', 'gateways', 'audit', 'rota', 'people'])
      expect([path, (await request(service.url).get(`/api/v1/${path}`)).status]).toEqual([path, 401]);
    problemOf(await request(service.url).post('/api/v1/design').send({}), 401);
  });
});

test('who may not see a site sees none of its axes, and an administrator tunes nothing', async () => {
  const axis = await commission({ admin, engineer }, service.siteIds[0]);
  await service.addPerson('elsewhere', [{ siteId: service.siteIds[1], role: 'approver' }]);
  const stranger = await service.as('elsewhere');
  problemOf(await stranger.get(`/api/v1/axes/${axis.axisId}`), 404);
  for (const path of ['estimates', 'indicators?resolution=second', 'tunings'])
    problemOf(await stranger.get(`/api/v1/axes/${axis.axisId}/${path}`), 404);
  problemOf(
    await stranger.post(`/api/v1/axes/${axis.axisId}/maintenance`).send({ on: true, reason: 'x' }),
    404,
  );
  problemOf(await stranger.patch(`/api/v1/axes/${axis.axisId}`).send({ name: 'Mine' }), 404);
  const { body } = await stranger.get('/api/v1/axes?limit=1000').expect(200);
  const sites = (body as { items: { siteId: number }[] }).items.map(({ siteId }) => siteId);
  expect(new Set(sites)).toEqual(new Set([service.siteIds[1]]));

  problemOf(await admin.patch(`/api/v1/axes/${axis.axisId}`).send({ name: 'x' }), 403);
  problemOf(await admin.post(`/api/v1/axes/${axis.axisId}/maintenance`).send({ on: true, reason: 'x' }), 403);
  problemOf(await admin.post('/api/v1/proposals').send({ axisId: axis.axisId }), 403);
  problemOf(await engineer.post('/api/v1/gateways').send({ siteId: service.siteIds[0], name: 'x' }), 403);
});
