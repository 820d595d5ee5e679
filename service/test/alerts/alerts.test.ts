import { afterAll, beforeAll, beforeEach, describe, expect, test, vi, type MockInstance } from 'vitest';
import { AlertWatch } from '../../src/alerts/alert-watch.service.js';
import { commission, FakeGateway, type CommissionedAxis } from '../support/fake-gateway.js';
import { startService, until, type Caller, type Service } from '../support/start-service.js';

const STEP_US = 10_000;
const PER_SECOND = 1e6 / STEP_US;
const RESOLUTION = 0.01;
const TOLERANCE = 0.5;

interface AlertBody {
  id: number;
  axisId: number;
  rule: string;
  priority: string;
  state: string;
  raisedAt: string;
  acknowledgedAt: string | null;
  acknowledgedBy: string | null;
  returnedAt: string | null;
  message: string;
  action: string;
  events: { by: string; action: string; note: string | null }[];
}

let service: Service;
let admin: Caller;
let engineer: Caller;
let technician: Caller;
let viewer: Caller;
let stranger: Caller;
let looks: MockInstance<AlertWatch['lookAtAll']>;

beforeAll(async () => {
  service = await startService();
  looks = vi.spyOn(service.app.get(AlertWatch), 'lookAtAll');
  [admin, engineer, technician, viewer] = (await Promise.all(
    ['admin', 'engineer', 'technician', 'viewer'].map((who) => service.as(who)),
  )) as [Caller, Caller, Caller, Caller];
  await service.addPerson('elsewhere', [{ siteId: service.siteIds[1], role: 'approver' }]);
  stranger = await service.as('elsewhere');
  // The rule's delays are tested with a clock of their own; here an alert comes and goes at the next look.
  await engineer.patch('/api/v1/alert-rules/following-error').send({ onDelay: 0, offDelay: 0 }).expect(200);
});
afterAll(async () => {
  const settled = [...looks.mock.settledResults];
  await service?.close();
  // A look that fails for one axis would leave out those after it.
  expect(settled.length).toBeGreaterThan(10);
  expect(settled.filter(({ type }) => type === 'rejected')).toEqual([]);
});

/** An axis whose following error a test sets, half a minute at a time. */
class TestSlide {
  private sequence = 0;
  private second = Math.floor(Date.now() / 1000) - 3_000;

  private constructor(
    readonly axis: CommissionedAxis,
    private readonly gateway: FakeGateway,
  ) {}

  static async start(): Promise<TestSlide> {
    const axis = await commission({ admin, engineer }, service.siteIds[0], {
      sampleTime: STEP_US / 1e6,
      resolution: RESOLUTION,
      pattern: { kind: 'triple', lambda: 8 },
      tolerances: { followingError: TOLERANCE, gainPct: 15, polePct: 20, saturatedPct: 5 },
    });
    const gateway = await FakeGateway.connect(service.url, { token: axis.token });
    await gateway.hello([axis.tag], 'a');
    return new TestSlide(axis, gateway);
  }

  /** Moves for 31 s, so that the last half minute is all of this. */
  async moveWithError(mm: number): Promise<void> {
    const n = 31 * PER_SECOND;
    const target = Int32Array.from({ length: n + 1 }, (_, i) => 100 * (i % 50));
    const answer = await this.gateway.frame(++this.sequence, [
      {
        axisIndex: 0,
        motionEnabled: true,
        gapBefore: false,
        sampleTimeUs: STEP_US,
        startUs: this.second * 1e6,
        target: target.subarray(0, n),
        position: target.map((r) => r - Math.round(mm / RESOLUTION)).subarray(0, n),
        output: new Int16Array(n),
      },
    ]);
    expect(answer).toEqual({ received: this.sequence });
    this.second += 31;
    await this.gateway.untilDurable(this.sequence);
  }

  async alerts(query = ''): Promise<AlertBody[]> {
    const { body } = await viewer.get(`/api/v1/alerts?axisId=${this.axis.axisId}${query}`).expect(200);
    return (body as { items: AlertBody[] }).items;
  }

  untilAlert(state: string): Promise<AlertBody> {
    return until(`an alert that is ${state}`, async () =>
      (await this.alerts(`&state=${state}`)).find(({ rule }) => rule === 'following-error'),
    );
  }

  close(): void {
    this.gateway.close();
  }
}

const path = (alert: AlertBody, step = ''): string => `/api/v1/alerts/${alert.id}${step && `/${step}`}`;
const ahead = (minutes: number): string => new Date(Date.now() + minutes * 60_000).toISOString();

/** Every axis is looked at twice more by every rule. */
async function twoLooks(): Promise<void> {
  const before = looks.mock.settledResults.length;
  await until('two more looks', () => looks.mock.settledResults.length >= before + 2);
}

let slide: TestSlide;
let alert: AlertBody;
beforeEach(async () => {
  slide?.close();
  slide = await TestSlide.start();
  await slide.moveWithError(0.8);
  alert = await slide.untilAlert('unacknowledged');
});

describe('a following error beyond tolerance', () => {
  test('raises an alert that says what is, what is allowed and what to do', async () => {
    expect(alert).toMatchObject({
      axisId: slide.axis.axisId,
      priority: 'high',
      message: 'Following error reaches 0.80 mm, allowed 0.50 mm.',
      acknowledgedAt: null,
      returnedAt: null,
    });
    expect(alert.action).not.toBe('');
    expect(alert.events.map(({ by, action }) => [by, action])).toEqual([['service', 'raised']]);
    // The axis says so as well.
    await until('the axis is out of tune', async () => {
      const { body } = await viewer.get(`/api/v1/axes/${slide.axis.axisId}`).expect(200);
      return (body as { state: string }).state === 'out-of-tune';
    });
    expect(await slide.alerts('&state=open')).toHaveLength(1);
    expect(await slide.alerts('&state=normal')).toEqual([]);
  });

  test('goes through acknowledgement to normal, with names and times', async () => {
    const { body } = await technician
      .post(path(alert, 'acknowledge'))
      .send({ note: 'On my way' })
      .expect(200);
    expect(body).toMatchObject({ state: 'acknowledged', acknowledgedBy: 'Tomas Birkwell' });
    await technician.post(path(alert, 'acknowledge')).send({}).expect(409);
    await slide.moveWithError(0.1);
    const over = await slide.untilAlert('normal');
    expect(over.returnedAt).not.toBeNull();
    expect(over.events.map(({ by, action, note }) => [by, action, note]).slice(1)).toEqual([
      ['Tomas Birkwell', 'acknowledged', 'On my way'],
      ['service', 'returned to normal', null],
    ]);
    await technician.post(path(alert, 'acknowledge')).send({}).expect(409);
    // The next time it is another alert.
    await slide.moveWithError(0.9);
    expect((await slide.untilAlert('unacknowledged')).id).not.toBe(alert.id);
  });

  test('that returns before anybody looked still wants acknowledging; if it comes again it is the same alert', async () => {
    await slide.moveWithError(0.46); // within the deadband: below 0.5, not below 0.45
    await twoLooks();
    expect((await slide.alerts())[0]).toMatchObject({ id: alert.id, state: 'unacknowledged' });
    await slide.moveWithError(0.1);
    await slide.untilAlert('returned-unacknowledged');
    await slide.moveWithError(0.7);
    expect(await slide.untilAlert('unacknowledged')).toMatchObject({
      id: alert.id,
      message: 'Following error reaches 0.70 mm, allowed 0.50 mm.',
    });
    await slide.moveWithError(0.1);
    await slide.untilAlert('returned-unacknowledged');
    const { body } = await technician.post(path(alert, 'acknowledge')).send({}).expect(200);
    expect(body).toMatchObject({ id: alert.id, state: 'normal' });
  });
});

describe('shelving', () => {
  test('takes a reason and an end that lies ahead within 30 days', async () => {
    const shelve = (body: object): ReturnType<Caller['post']> =>
      technician.post(path(alert, 'shelve')).send(body);
    for (const [body, field] of [
      [{ until: ahead(-1), reason: 'Known' }, 'until'],
      [{ until: ahead(31 * 24 * 60), reason: 'Known' }, 'until'],
      [{ until: 'tomorrow', reason: 'Known' }, 'until'],
      [{ reason: 'Known' }, 'until'],
      [{ until: ahead(10) }, 'reason'],
      [{ until: ahead(10), reason: '' }, 'reason'],
      [{ until: ahead(10), reason: 5 }, 'reason'],
    ] as const) {
      const answer = await shelve(body).expect(400);
      expect(answer.headers['content-type']).toMatch(/^application\/problem\+json/);
      const { errors } = answer.body as { errors: { path: string }[] };
      expect(new Set(errors.map((error) => error.path))).toEqual(new Set([field]));
    }
    expect((await slide.alerts())[0]).toMatchObject({ state: 'unacknowledged' });
    await shelve({ until: ahead(10), reason: 'New tooling until noon' }).expect(200);
    expect((await slide.alerts())[0]).toMatchObject({ state: 'shelved' });
  });

  test('ends by hand: back to unacknowledged while the error stands', async () => {
    await technician.post(path(alert, 'unshelve')).send({}).expect(409);
    await technician
      .post(path(alert, 'shelve'))
      .send({ until: ahead(10), reason: 'Known' })
      .expect(200);
    const { body } = await technician.post(path(alert, 'unshelve')).send({}).expect(200);
    expect(body).toMatchObject({ state: 'unacknowledged' });
  });

  test('ends by time, and an error that went meanwhile is over then', async () => {
    await technician
      .post(path(alert, 'shelve'))
      .send({ until: ahead(10), reason: 'Known' })
      .expect(200);
    await slide.moveWithError(0.1);
    await twoLooks();
    expect((await slide.alerts())[0]).toMatchObject({ state: 'shelved' });
    // As if ten minutes had passed.
    await service.dataSource.query(
      `UPDATE "alert" SET "shelvedUntil" = datetime('now', '-1 seconds') WHERE "id" = ?`,
      [alert.id],
    );
    const over = await slide.untilAlert('normal');
    expect(over.returnedAt).not.toBeNull();
    expect(over.events.map(({ action }) => action)).toEqual([
      'raised',
      'shelved',
      'returned to normal',
      'taken off the shelf',
    ]);
  });
});

test('out of service: by an engineer with a reason, silent until an engineer returns it', async () => {
  const outOf = (who: Caller, body: object): ReturnType<Caller['post']> =>
    who.post(path(alert, 'take-out-of-service')).send(body);
  await outOf(technician, { reason: 'Encoder on order' }).expect(403);
  await outOf(stranger, { reason: 'Encoder on order' }).expect(404);
  for (const body of [{}, { reason: '' }, { reason: 5 }, { reason: 'x'.repeat(2001) }]) {
    const answer = await outOf(engineer, body).expect(400);
    expect((answer.body as { errors: { path: string }[] }).errors[0]!.path).toBe('reason');
  }
  await engineer.post(path(alert, 'return-to-service')).send({}).expect(409);
  const { body } = await outOf(engineer, { reason: 'Encoder on order' }).expect(200);
  expect(body).toMatchObject({
    state: 'out-of-service',
    outOfServiceReason: 'Encoder on order',
    nextStepAt: null,
  });
  await outOf(engineer, { reason: 'Again' }).expect(409);
  await technician.post(path(alert, 'acknowledge')).send({}).expect(409);
  await twoLooks();
  expect((await slide.alerts('&state=open')).map(({ state }) => state)).toEqual(['out-of-service']);
  const back = await engineer.post(path(alert, 'return-to-service')).send({}).expect(200);
  expect(back.body).toMatchObject({ state: 'unacknowledged', outOfServiceReason: null });
});

test('a rule counts on every site: who may change it on one of them only is refused', async () => {
  await service.addPerson('oneside', [{ siteId: service.siteIds[0], role: 'engineer' }]);
  const oneside = await service.as('oneside');
  const answer = await oneside.patch('/api/v1/alert-rules/no-signal').send({ threshold: 11 }).expect(403);
  expect((answer.body as { detail: string }).detail).toMatch(/every site/);
  const wrong = await engineer
    .patch('/api/v1/alert-rules/no-signal')
    .send({ threshold: 5, deadband: 5 })
    .expect(400);
  expect((wrong.body as { errors: { path: string }[] }).errors).toMatchObject([{ path: 'deadband' }]);
  const none = await engineer
    .patch('/api/v1/alert-rules/no-signal')
    .send({ threshold: null, onDelay: 2.5 })
    .expect(400);
  const named = (none.body as { errors: { path: string }[] }).errors.map(({ path: at }) => at);
  expect(new Set(named)).toEqual(new Set(['threshold', 'onDelay']));
});

test('maintenance suppresses an alert; afterwards it is over if the error is, and back if it stands', async () => {
  const maintain = (on: boolean): Promise<unknown> =>
    technician
      .post(`/api/v1/axes/${slide.axis.axisId}/maintenance`)
      .send({ on, reason: 'Guide change' })
      .expect(200);
  await maintain(true);
  await slide.untilAlert('suppressed');
  await maintain(false);
  await slide.untilAlert('unacknowledged');
  await maintain(true);
  await slide.untilAlert('suppressed');
  await slide.moveWithError(0.1);
  await maintain(false);
  expect((await slide.untilAlert('normal')).returnedAt).not.toBeNull();
});

describe('who may', () => {
  test('a viewer sees, and changes nothing', async () => {
    await viewer.get(path(alert)).expect(200);
    await viewer.post(path(alert, 'acknowledge')).send({}).expect(403);
    await viewer
      .post(path(alert, 'shelve'))
      .send({ until: ahead(5), reason: 'x' })
      .expect(403);
    await viewer.post(path(alert, 'unshelve')).send({}).expect(403);
    await viewer.post(path(alert, 'note')).send({ note: 'x' }).expect(403);
    await viewer.patch('/api/v1/alert-rules/no-signal').send({ threshold: 1e6 }).expect(403);
    await technician.patch('/api/v1/alert-rules/no-signal').send({ threshold: 1e6 }).expect(403);
    expect((await slide.alerts())[0]).toMatchObject({ state: 'unacknowledged' });
  });

  test('for somebody of another site the alert does not exist', async () => {
    await stranger.get(path(alert)).expect(404);
    await stranger.post(path(alert, 'acknowledge')).send({}).expect(404);
    await stranger
      .post(path(alert, 'shelve'))
      .send({ until: ahead(5), reason: 'x' })
      .expect(404);
    const { body } = await stranger.get('/api/v1/alerts?limit=1000').expect(200);
    expect(
      (body as { items: AlertBody[] }).items.filter(({ axisId }) => axisId === slide.axis.axisId),
    ).toEqual([]);
    expect((await slide.alerts())[0]).toMatchObject({ state: 'unacknowledged' });
  });
});
