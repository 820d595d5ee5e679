import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { Axis } from './axis.js';
import { faultControl, type AxisTruth } from './fault-control.js';
import { Gateway, GATEWAY_DEFAULTS, wallClock } from './gateway.js';
import { serveLoopback } from './loopback-server.js';
import { sheetGains, tarnwickAxis } from './commissioned.js';

const feed = tarnwickAxis('CU-03 feed');
let axis: Axis;
let base: string;
let close: () => Promise<void>;

beforeAll(async () => {
  axis = new Axis(feed, 1);
  axis.start({ revision: 3, gains: sheetGains(feed), structure: feed.structure });
  const gateway = new Gateway([axis], {
    ...GATEWAY_DEFAULTS,
    name: 'tile-hall-1',
    url: 'http://127.0.0.1:1',
    token: () => '',
    now: wallClock,
    log: () => undefined,
  });
  const served = await serveLoopback(
    0,
    faultControl([{ axis, gateway: 'tile-hall-1' }], [{ name: 'tile-hall-1', gateway }]),
  );
  base = `http://127.0.0.1:${served.port}`;
  close = served.close;
});
afterAll(() => close());
beforeEach(() => axis.heal());

const post = (body: unknown): Promise<Response> =>
  fetch(`${base}/faults`, { method: 'POST', body: typeof body === 'string' ? body : JSON.stringify(body) });

describe('fault control', () => {
  it('tells the truth about every axis', async () => {
    const { items } = (await (await fetch(`${base}/axes`)).json()) as { items: AxisTruth[] };
    expect(items).toHaveLength(1);
    const { mass, viscous, coulomb, forceForward, offset } = feed.physics;
    expect(items[0]).toMatchObject({
      tag: 'CU-03 feed',
      gateway: 'tile-hall-1',
      gain: expect.closeTo((1000 * forceForward) / viscous, 9),
      pole: expect.closeTo(viscous / mass, 9),
      coulomb: expect.closeTo(coulomb / forceForward, 9),
      bias: expect.closeTo(offset / forceForward, 9),
      revision: 3,
      structure: 'PI-D',
      gains: { kp: Math.fround(sheetGains(feed).kp) },
      faults: [],
    });
  });

  it('makes a fault and heals it', async () => {
    const made = await post({ axis: feed.tag, kind: 'load', amount: 0.6 });
    expect(made.status).toBe(201);
    const truth = (await made.json()) as AxisTruth;
    expect(truth.pole).toBeCloseTo(feed.physics.viscous / feed.physics.mass / 1.6, 9);
    expect(truth.faults).toMatchObject([{ kind: 'load', amount: 0.6, rampSeconds: 0 }]);
    const healed = await fetch(`${base}/faults/${encodeURIComponent(feed.tag)}`, { method: 'DELETE' });
    expect(((await healed.json()) as AxisTruth).faults).toEqual([]);
    expect(axis.physics).toEqual(feed.physics);
  });

  it('says how it is', async () => {
    const health = (await (await fetch(`${base}/health`)).json()) as object;
    expect(health).toEqual({
      status: 'running',
      axes: 1,
      gateways: [
        { name: 'tile-hall-1', connected: false, lastSequence: 0, kept: 0, dropped: 0, refused: {} },
      ],
    });
  });

  it.each([
    ['no JSON', '{', 400, undefined],
    ['no object', '[1]', 400, undefined],
    ['nothing', '', 400, undefined],
    ['no axis', { kind: 'load' }, 400, 'axis'],
    ['an unknown axis', { axis: 'XX-01', kind: 'load' }, 404, undefined],
    ['an unknown kind', { axis: feed.tag, kind: 'gremlins' }, 400, 'kind'],
    ['a text for a number', { axis: feed.tag, kind: 'load', amount: '0.6' }, 400, 'amount'],
    ['an amount that makes no sense', { axis: feed.tag, kind: 'load', amount: -3 }, 400, 'amount'],
    ['a key that means nothing', { axis: feed.tag, kind: 'load', size: 1 }, 400, 'size'],
  ])('refuses %s and changes nothing', async (_, body, status, path) => {
    const refused = await post(body);
    expect(refused.status).toBe(status);
    const problem = (await refused.json()) as { detail: string; errors?: { path: string }[] };
    expect(problem.detail.length).toBeGreaterThan(5);
    expect(problem.errors?.[0]?.path).toBe(path);
    expect(axis.faults).toEqual([]);
  });

  it('refuses a fault that with those already there would leave no mass', async () => {
    const half = { axis: feed.tag, kind: 'load', amount: -0.5 };
    expect((await post(half)).status).toBe(201);
    const refused = await post(half);
    expect(refused.status).toBe(409);
    const { errors } = (await refused.json()) as { errors: { path: string }[] };
    expect(errors[0]!.path).toBe('amount');
    expect(axis.faults).toHaveLength(1);
    expect(axis.physics.mass).toBeCloseTo(feed.physics.mass / 2, 9);
  });

  it('refuses what it does not know, and a query where none belongs', async () => {
    expect((await fetch(`${base}/nowhere`)).status).toBe(404);
    expect((await fetch(`${base}/axes?state=1`)).status).toBe(400);
    expect((await fetch(`${base}/faults/XX-01`, { method: 'DELETE' })).status).toBe(404);
    expect((await fetch(`${base}/axes/%E0%A4%A`)).status).toBe(400);
    expect((await fetch(`${base}//`)).status).toBe(400);
    expect((await post('x'.repeat(200_000))).status).toBe(413);
  });
});
