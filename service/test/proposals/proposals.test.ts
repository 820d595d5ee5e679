import { afterAll, beforeAll, expect, test, vi, type MockInstance } from 'vitest';
import { CHECKLIST } from '../../src/proposals/checklist.js';
import { ReadBackService } from '../../src/proposals/read-back.service.js';
import { DEMO_PASSWORD, startService, until, type Caller, type Service } from '../support/start-service.js';
import { closedFormula, LAMBDA, PLANT, ProposalBench, type ProposalBody } from './proposal-bench.js';

const CONFIRMED = Object.fromEntries(CHECKLIST.map(({ key }) => [key, true]));
/** The load becomes heavier by this factor: α falls to 1/1.6 of its baseline, K stays. */
const HEAVIER = 1.6;

let service: Service;
let viewer: Caller;
let technician: Caller;
let engineer: Caller;
let approver: Caller;
let secondApprover: Caller;
let stranger: Caller;
let readBacks: MockInstance<ReadBackService['readBack']>;

beforeAll(async () => {
  service = await startService();
  readBacks = vi.spyOn(service.app.get(ReadBackService), 'readBack');
  await service.addPerson('second-approver', [{ siteId: service.siteIds[0], role: 'approver' }]);
  await service.addPerson('elsewhere', [{ siteId: service.siteIds[1], role: 'approver' }]);
  [viewer, technician, engineer, approver, secondApprover, stranger] = (await Promise.all(
    ['viewer', 'technician', 'engineer', 'approver', 'second-approver', 'elsewhere'].map(service.as),
  )) as [Caller, Caller, Caller, Caller, Caller, Caller];
});
afterAll(async () => {
  const settled = [...readBacks.mock.settledResults];
  await service?.close();
  expect(settled.filter(({ type }) => type !== 'fulfilled')).toEqual([]);
});

const path = (id: number, step = ''): string => `/api/v1/proposals/${id}${step && `/${step}`}`;
const at = (minutes: number): string => new Date(Date.now() + minutes * 60_000).toISOString();
const step = (who: Caller, id: number, name: string, body: object = {}): ReturnType<Caller['post']> =>
  who.post(path(id, name)).send(body);

/** A step is refused with the status and changes neither state nor version nor history. */
async function refused(
  bench: ProposalBench,
  before: ProposalBody,
  status: number,
  request: ReturnType<Caller['post']>,
): Promise<string> {
  const answer = await request;
  expect([answer.status, (answer.body as { detail?: string }).detail]).toEqual([status, expect.anything()]);
  expect(answer.headers['content-type']).toMatch(/^application\/problem\+json/);
  const after = await bench.get(before.id);
  expect([after.state, after.version, after.events]).toEqual([before.state, before.version, before.events]);
  return JSON.stringify(answer.body);
}

const actions = ({ events }: ProposalBody): string[] => events.map(({ action }) => action);

test('a heavier load: drift, proposal, review by a second person, applying, trial, keep', async () => {
  const bench = await ProposalBench.start(service, 240);
  try {
    // As commissioned, then heavier, until drift is decided and the estimate has settled.
    await bench.stream(60);
    expect(await bench.open()).toBeUndefined();
    bench.machine.load = HEAVIER;
    await bench.stream(150);
    let proposal = await until('a proposal', () => bench.open());
    await until('the draft has followed the newest evidence', async () => {
      const { estimate } = await bench.axisBody();
      proposal = (await bench.open())!;
      return Math.abs(proposal.evidence.estimate.pole.value / estimate.pole.value - 1) < 0.02;
    });
    expect(proposal).toMatchObject({
      state: 'drafted',
      source: 'drift',
      probableCause: { name: 'load', advice: 'retune' },
      current: { revision: 1 },
      proposed: { structure: 'PI-D', lambda: LAMBDA },
      binding: { kept: true },
    });
    expect(proposal.evidence.decisions.map(({ quantity }) => quantity)).toEqual(['pole']);
    const { gain, pole } = proposal.evidence.estimate;
    expect(gain.value / PLANT.gain).toBeCloseTo(1, 1);
    expect(pole.value / (PLANT.pole / HEAVIER)).toBeCloseTo(1, 1);
    for (const [name, value] of Object.entries(closedFormula(gain.value, pole.value, LAMBDA)))
      expect(proposal.proposed!.gains[name as 'kp'] / value).toBeCloseTo(1, 9);
    expect(proposal.current.gains).toEqual((await bench.axisBody()).gains);
    expect(proposal.expected!.after!.peakFollowingError).toBeLessThan(
      proposal.expected!.before.peakFollowingError,
    );
    const { id } = proposal;

    // Altering takes a version, the present one, numbers for numbers, and an engineer.
    const alter = (who: Caller, body: object, version?: number): ReturnType<Caller['patch']> => {
      const request = who.patch(path(id));
      return (version === undefined ? request : request.set('If-Match', `"${version}"`)).send(body);
    };
    const { version } = proposal;
    await refused(bench, proposal, 428, alter(engineer, { note: 'x' }));
    expect(await refused(bench, proposal, 409, alter(engineer, { note: 'x' }, version - 1))).toContain(
      `it is version ${version} now`,
    );
    await refused(bench, proposal, 403, alter(technician, { note: 'x' }, version));
    await refused(bench, proposal, 403, alter(viewer, { note: 'x' }, version));
    await refused(bench, proposal, 404, alter(stranger, { note: 'x' }, version));
    const wrong = await alter(engineer, { gains: { kp: '1', ki: 1, kd: 1 }, lambda: 3 }, version).expect(400);
    expect((wrong.body as { errors: { path: string }[] }).errors.map((error) => error.path).sort()).toEqual([
      'gains.kp',
      'lambda',
    ]);

    // Whoever altered or submitted it does not approve it.
    await alter(approver, { note: 'Pallets are heavier since Monday' }, version).expect(200);
    proposal = await bench.get(id);
    expect(proposal.version).toBe(version + 1);
    await refused(bench, proposal, 403, step(technician, id, 'submit'));
    await refused(bench, proposal, 409, step(approver, id, 'approve'));
    await step(engineer, id, 'submit').expect(200);
    proposal = await bench.get(id);
    expect(proposal.state).toBe('in review');
    await refused(bench, proposal, 403, step(engineer, id, 'approve'));
    expect(await refused(bench, proposal, 403, step(approver, id, 'approve'))).toContain('cannot approve');
    await refused(bench, proposal, 404, step(stranger, id, 'approve'));
    await refused(
      bench,
      proposal,
      409,
      step(technician, id, 'apply', { checklist: CONFIRMED, password: 'x' }),
    );
    await step(secondApprover, id, 'approve').expect(200);
    await step(secondApprover, id, 'approve').expect(409);

    // A window that ends after it begins and has not passed.
    proposal = await bench.get(id);
    await refused(bench, proposal, 400, step(engineer, id, 'schedule', { from: at(6), to: at(5) }));
    await refused(bench, proposal, 400, step(engineer, id, 'schedule', { from: at(-9), to: at(-1) }));
    await refused(bench, proposal, 400, step(engineer, id, 'schedule', { from: 'soon', to: at(9) }));
    await refused(bench, proposal, 403, step(technician, id, 'schedule', { from: at(-1), to: at(60) }));
    await step(engineer, id, 'schedule', { from: at(30), to: at(60) }).expect(200);

    // Nothing leaves before window, maintenance, rest, checklist and password are all there.
    const apply = (body: object = {}): ReturnType<Caller['post']> =>
      step(technician, id, 'apply', { checklist: CONFIRMED, password: DEMO_PASSWORD, ...body });
    proposal = await bench.get(id);
    expect(await refused(bench, proposal, 409, apply())).toContain('window');
    await step(engineer, id, 'schedule', { from: at(-1), to: at(60) }).expect(200);
    proposal = await bench.get(id);
    expect(await refused(bench, proposal, 409, apply())).toContain('in production');
    await bench.stream(1); // in motion at its end
    await bench.maintain(technician, true);
    await until('the gateway hears of it', () => bench.gateway.maintenance.at(-1)?.on === true);
    expect(await refused(bench, proposal, 409, apply())).toContain('not at rest');
    await bench.stream(4, false);
    expect(
      await refused(bench, proposal, 400, apply({ checklist: { ...CONFIRMED, 'people-clear': false } })),
    ).toContain('checklist.people-clear');
    expect(await refused(bench, proposal, 403, apply({ password: 'polewright-demi' }))).toContain(
      'not yours',
    );
    await refused(
      bench,
      proposal,
      403,
      step(viewer, id, 'apply', { checklist: CONFIRMED, password: DEMO_PASSWORD }),
    );
    expect(bench.gateway.orders).toEqual([]);

    // A machine that reads other gains back has not applied them; the former ones are asked for.
    expect((await apply().expect(200)).body).toMatchObject({ state: 'applying' });
    const first = await until('the order', () => bench.gateway.orders[0]);
    expect(first).toEqual({
      axisId: bench.axis.axisId,
      revision: 2,
      gains: proposal.proposed!.gains,
      structure: 'PI-D',
    });
    await apply().expect(409);
    await bench.readBack(first, { kp: first.gains.kp * 1.000001 });
    proposal = await bench.untilState(id, 'scheduled');
    expect(proposal.events.at(-1)).toMatchObject({ by: 'service', action: 'not applied' });
    expect(proposal.events.at(-1)!.note).toContain('kp');
    const former = await until('the former gains', () => bench.gateway.orders[1]);
    expect(former).toMatchObject({ revision: 1, gains: proposal.current.gains });
    // Until they are read back nobody knows what the machine runs with: it does not go back into production.
    expect(proposal).toMatchObject({ restoring: true });
    await technician
      .post(`/api/v1/axes/${bench.axis.axisId}/maintenance`)
      .send({ on: false, reason: 'Done' })
      .expect(409);
    await bench.readBack(former);
    await until('the former gains are back', async () => !(await bench.get(id)).restoring);
    expect(await bench.axisBody()).toMatchObject({ revision: 1, gains: proposal.current.gains });

    // Silence is no read-back either: as if the order had left 16 s ago.
    await apply().expect(200);
    await service.dataSource.query(
      `UPDATE "proposal" SET "sentAt" = datetime('now', '-16 seconds') WHERE "id" = ?`,
      [id],
    );
    proposal = await bench.untilState(id, 'scheduled');
    expect(proposal.events.at(-1)!.note).toContain('in time');
    const late = bench.gateway.orders[2]!;
    await bench.readBack(late); // too late now
    expect((await bench.get(id)).state).toBe('scheduled');

    // The matching read-back counts, once, to the bit of a float32.
    await apply().expect(200);
    const order = await until('the order', () => bench.gateway.orders[4]);
    expect(order.revision).toBe(4);
    await Promise.all([bench.readBack(order), bench.readBack(order)]);
    proposal = await bench.untilState(id, 'on trial');
    expect(actions(proposal).filter((action) => action === 'applied')).toEqual(['applied']);
    expect(await bench.axisBody()).toMatchObject({ revision: 4, gains: proposal.proposed!.gains });
    const { body } = await viewer.get(`/api/v1/axes/${bench.axis.axisId}/tunings`).expect(200);
    const revisions = (body as { items: { revision: number; source: string; appliedBy: string }[] }).items;
    expect(revisions.find(({ revision }) => revision === 4)).toMatchObject({
      source: 'proposal',
      appliedBy: 'Tomas Birkwell',
    });
    expect(revisions.map(({ revision }) => revision).sort()).toEqual([1, 4]);

    // Production goes on; the same moves are compared.
    await bench.maintain(technician, false);
    bench.skipToNow();
    await bench.stream(60);
    proposal = await until('a verdict', async () => {
      const seen = await bench.get(id);
      return seen.trial?.verdict !== 'waiting' && seen;
    });
    expect(proposal.trial!.verdict).toBe('better');
    expect(proposal.trial!.moves.before).toBeGreaterThanOrEqual(8);
    expect(proposal.trial!.peakFollowingError!.after).toBeLessThan(
      proposal.trial!.peakFollowingError!.before,
    );
    await refused(bench, proposal, 403, step(technician, id, 'keep'));
    await step(engineer, id, 'keep').expect(200);
    proposal = await bench.get(id);
    expect(proposal.state).toBe('kept');
    for (const name of ['keep', 'roll-back', 'withdraw', 'submit'])
      await refused(
        bench,
        proposal,
        409,
        step(engineer, id, name, name === 'roll-back' ? { reason: 'x' } : {}),
      );
    const after = await bench.axisBody();
    expect(after.baseline.pole / after.estimate.pole.value).toBeCloseTo(1, 6);
    expect(actions(proposal).filter((action) => action !== 'newer evidence')).toEqual([
      'drafted',
      'altered',
      'sent for review',
      'approved',
      'scheduled',
      'scheduled',
      'gains sent',
      'not applied',
      'gains restored',
      'gains sent',
      'not applied',
      'gains sent',
      'applied',
      'kept',
    ]);
    // Every step is in the record as well.
    const record = await engineer
      .get(`/api/v1/audit?subjectType=proposal&subjectId=${id}&limit=200`)
      .expect(200);
    const recorded = (record.body as { items: { action: string }[] }).items;
    expect(
      new Set(recorded.map(({ action }) => action).filter((action) => action !== 'proposal.newer-evidence')),
    ).toEqual(
      new Set([
        'proposal.drafted',
        'proposal.altered',
        'proposal.sent-for-review',
        'proposal.approved',
        'proposal.scheduled',
        'proposal.gains-sent',
        'proposal.not-applied',
        'proposal.gains-restored',
        'proposal.applied',
        'proposal.kept',
      ]),
    );
  } finally {
    bench.gateway.close();
  }
}, 60_000);

test('on trial and not wanted: rolled back at the machine', async () => {
  const bench = await ProposalBench.start(service, 100);
  try {
    await bench.stream(60);
    // Nothing drifts; an engineer asks for slower poles.
    const wish = { axisId: bench.axis.axisId, pattern: { kind: 'triple', lambda: 26 }, note: 'Quieter' };
    await technician.post('/api/v1/proposals').send(wish).expect(403);
    await stranger.post('/api/v1/proposals').send(wish).expect(404);
    const made = await engineer.post('/api/v1/proposals').send(wish).expect(201);
    await engineer.post('/api/v1/proposals').send(wish).expect(409); // one at a time
    const { id, current } = made.body as ProposalBody;
    expect(made.body).toMatchObject({ source: 'person', state: 'drafted', probableCause: null });
    const before = await bench.axisBody();

    // A stale version is refused at every step that names one.
    await engineer.post(path(id, 'submit')).set('If-Match', '"7"').send({}).expect(409);
    await engineer.post(path(id, 'submit')).set('If-Match', '"1"').send({}).expect(200);
    // Declined without a reason: no. An alteration in review makes it a draft again.
    await step(approver, id, 'decline').expect(400);
    await engineer.patch(path(id)).set('If-Match', '"1"').send({ feedForward: true }).expect(200);
    expect(await bench.get(id)).toMatchObject({ state: 'drafted', version: 2 });
    await step(engineer, id, 'submit').expect(200);
    await step(approver, id, 'approve').expect(200);
    await step(engineer, id, 'schedule', { from: at(-1), to: at(60) }).expect(200);
    await bench.maintain(technician, true);
    await bench.stream(4, false);
    await step(technician, id, 'apply', { checklist: CONFIRMED, password: DEMO_PASSWORD }).expect(200);
    await bench.readBack(await until('the order', () => bench.gateway.orders[0]));
    let proposal = await bench.untilState(id, 'on trial');
    expect(await bench.axisBody()).toMatchObject({ revision: 2 });

    // Back in production nothing is sent; at rest in maintenance it is.
    await bench.maintain(technician, false);
    bench.skipToNow();
    await bench.stream(1);
    await refused(bench, proposal, 403, step(viewer, id, 'roll-back', { reason: 'Knocks' }));
    await refused(bench, proposal, 400, step(engineer, id, 'roll-back'));
    await refused(bench, proposal, 409, step(engineer, id, 'roll-back', { reason: 'Knocks' }));
    expect(bench.gateway.orders).toHaveLength(1);
    await bench.maintain(technician, true);
    await bench.stream(4, false);
    const answer = await step(engineer, id, 'roll-back', {
      reason: 'Knocks at the end of the stroke',
    }).expect(200);
    expect(answer.body).toMatchObject({ state: 'applying' });
    const back = await until('the former gains', () => bench.gateway.orders[1]);
    expect(back).toMatchObject({ revision: 3, gains: current.gains, structure: 'PI-D' });

    // Other gains read back: still on trial, and it can be asked for again.
    await bench.readBack(back, { ki: 0 });
    proposal = await bench.untilState(id, 'on trial');
    expect(proposal.events.at(-1)).toMatchObject({ action: 'not applied' });
    await step(engineer, id, 'roll-back', { reason: 'Knocks at the end of the stroke' }).expect(200);
    const again = await until('the former gains again', () =>
      bench.gateway.orders.find(({ revision }) => revision === 4),
    );
    await Promise.all([bench.readBack(again), bench.readBack(again)]);
    proposal = await bench.untilState(id, 'rolled back');
    expect(actions(proposal).slice(-3)).toEqual(['not applied', 'roll-back asked for', 'rolled back']);
    const after = await bench.axisBody();
    expect(after).toMatchObject({ revision: 4, gains: current.gains, baseline: before.baseline });
    const { body } = await viewer.get(`/api/v1/axes/${bench.axis.axisId}/tunings`).expect(200);
    const revisions = (body as { items: { revision: number; source: string; appliedBy: string }[] }).items;
    expect(revisions.map(({ revision }) => revision).sort()).toEqual([1, 2, 4]);
    // By who asked for it, not by who had applied the gains that went.
    expect(revisions.find(({ revision }) => revision === 4)).toMatchObject({
      source: 'roll-back',
      appliedBy: 'Ines Harrowgate',
    });
    await refused(bench, proposal, 409, step(engineer, id, 'keep'));
  } finally {
    bench.gateway.close();
  }
}, 60_000);
