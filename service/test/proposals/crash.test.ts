import { join } from 'node:path';
import { rmSync } from 'node:fs';
import { afterAll, beforeAll, expect, test, vi } from 'vitest';
import { CHECKLIST } from '../../src/proposals/checklist.js';
import { TelemetryGateway } from '../../src/telemetry/telemetry.gateway.js';
import { FakeGateway } from '../support/fake-gateway.js';
import {
  DEMO_PASSWORD,
  startService,
  temporaryFolder,
  until,
  type Service,
} from '../support/start-service.js';
import { ProposalBench, type ProposalBody } from './proposal-bench.js';

/**
 * The service is killed at each state that applying leaves in the database. Each copy is taken at that very point of
 * the one run below, and is what a service that is killed there finds at its next start.
 */
const POINTS = [
  'scheduled, nothing asked for',
  'order written down, not yet sent',
  'order sent, not read back',
  'written down as not applied, former gains not yet asked for',
  'former gains asked for, not read back',
  'applied',
] as const;
type Point = (typeof POINTS)[number];

const FOLDER = temporaryFolder();
const copies = new Map<Point, string>();
let service: Service;
let bench: ProposalBench;
let proposal: ProposalBody;
/** What left for the machine in the run before the crash, by point. */
const leftBefore = new Map<Point, number[]>();

const copy = async (point: Point): Promise<void> => {
  const path = join(FOLDER, `${POINTS.indexOf(point)}.sqlite`);
  await service.dataSource.query('VACUUM INTO ?', [path]);
  copies.set(point, path);
};

beforeAll(async () => {
  service = await startService();
  const [technician, engineer, approver] = await Promise.all(
    ['technician', 'engineer', 'approver'].map(service.as),
  );
  bench = await ProposalBench.start(service, 100);
  await bench.stream(45);
  const made = await engineer!
    .post('/api/v1/proposals')
    .send({ axisId: bench.axis.axisId, pattern: { kind: 'triple', lambda: 26 } })
    .expect(201);
  const { id } = made.body as ProposalBody;
  const step = (who: typeof technician, name: string, body: object = {}): Promise<unknown> =>
    who!.post(`/api/v1/proposals/${id}/${name}`).send(body).expect(200);
  await step(engineer, 'submit');
  await step(approver, 'approve');
  const at = (minutes: number): string => new Date(Date.now() + minutes * 60_000).toISOString();
  await step(engineer, 'schedule', { from: at(-1), to: at(60) });
  await bench.maintain(technician!, true);
  await bench.stream(4, false);
  const apply = (): Promise<unknown> =>
    step(technician, 'apply', {
      checklist: Object.fromEntries(CHECKLIST.map(({ key }) => [key, true])),
      password: DEMO_PASSWORD,
    });
  await copy('scheduled, nothing asked for');

  // Copies in the moment between what is written down and what leaves.
  const gateway = service.app.get(TelemetryGateway);
  const sendGains = gateway.sendGains.bind(gateway);
  const sent: number[] = [];
  const next: Point[] = [
    'order written down, not yet sent',
    'written down as not applied, former gains not yet asked for',
  ];
  const copying: Promise<void>[] = [];
  vi.spyOn(gateway, 'sendGains').mockImplementation((axisId, revision, gains, structure) => {
    const point = next.shift();
    if (!point) return sendGains(axisId, revision, gains, structure);
    leftBefore.set(point, [...sent]);
    copying.push(
      copy(point).then(() => {
        sendGains(axisId, revision, gains, structure);
        sent.push(revision);
      }),
    );
    return true;
  });
  await apply();
  const order = await until('the order', () => bench.gateway.orders[0]);
  await Promise.all(copying);
  await copy('order sent, not read back');
  leftBefore.set('order sent, not read back', [...sent]);
  await bench.readBack(order, { kp: 1 });
  await bench.untilState(id, 'scheduled');
  const former = await until('the former gains', () => bench.gateway.orders[1]);
  await Promise.all(copying);
  await copy('former gains asked for, not read back');
  await bench.readBack(former);
  await apply();
  await bench.readBack(await until('the second order', () => bench.gateway.orders[2]));
  proposal = await bench.untilState(id, 'on trial');
  await copy('applied');
}, 60_000);
afterAll(async () => {
  bench?.gateway.close();
  await service?.close();
  rmSync(FOLDER, { recursive: true, force: true });
});

test('the run before the crash went as written above', () => {
  expect([...copies.keys()].sort()).toEqual([...POINTS].sort());
  expect(leftBefore.get('order written down, not yet sent')).toEqual([]);
  expect(leftBefore.get('order sent, not read back')).toEqual([2]);
});

test('a gateway that is lost after sending and greets anew has applied nothing', async () => {
  // The run's service, its axis on trial: rolling back is sent, and the gateway goes away.
  const engineer = await service.as('engineer');
  await engineer.post(`/api/v1/proposals/${proposal.id}/roll-back`).send({ reason: 'Knocks' }).expect(200);
  await until('the former gains', () => bench.gateway.orders.find(({ revision }) => revision === 4));
  bench.gateway.close();
  const again = await FakeGateway.connect(service.url, { token: bench.axis.token });
  try {
    expect((await again.hello([bench.axis.tag], 'b')).axes[0]).toMatchObject({ revision: 3 });
    const lost = await until('not applied', async () => {
      const seen = await bench.get(proposal.id);
      return seen.state === 'on trial' && seen;
    });
    expect(lost).toMatchObject({ restoring: true });
    expect(lost.events.at(-1)).toMatchObject({
      action: 'not applied',
      note: 'The gateway was lost before it read the gains back',
    });
    await until('the running gains', () => again.orders.find(({ revision }) => revision === 3));
    // Everybody who worked on it and the person on call are told, once each.
    const mails = (await service.dataSource.query(
      `SELECT "to", "subject" FROM "mail_outbox" WHERE "key" LIKE ? AND "subject" LIKE '%not applied%'`,
      [`proposal ${proposal.id} event %`],
    )) as { to: string }[];
    for (const who of ['engineer', 'approver', 'technician'])
      expect(mails.filter(({ to }) => to === `${who}@tarnwick.example`)).toHaveLength(2);
  } finally {
    again.close();
  }
});

test.each(POINTS)(
  'killed: %s',
  async (point) => {
    const restarted = await startService(copies.get(point)!);
    const gateway = await FakeGateway.connect(restarted.url, { token: bench.axis.token });
    try {
      const viewer = await restarted.as('viewer');
      const { axisId, tag } = bench.axis;
      const look = async (): Promise<ProposalBody> =>
        (await viewer.get(`/api/v1/proposals/${proposal.id}`).expect(200)).body as ProposalBody;
      const applied = point === 'applied';
      const { axes } = await gateway.hello([tag], 'after');
      // The machine is told what it runs with: never what nobody has read back.
      expect(axes[0]).toMatchObject({
        revision: applied ? 3 : 1,
        gains: applied ? proposal.proposed!.gains : proposal.current.gains,
        maintenance: true,
      });
      const state = await until('the state is settled', async () => {
        const seen = await look();
        return seen.state !== 'applying' && seen;
      });
      expect(state.state).toBe(applied ? 'on trial' : 'scheduled');

      const unsure = !applied && point !== 'scheduled, nothing asked for';
      expect(state.restoring).toBe(unsure);
      if (unsure) {
        expect(state.events.map(({ action }) => action)).toContain('not applied');
        const asked = await until('the running gains are asked for', () => gateway.orders[0]);
        expect(asked).toMatchObject({ axisId, revision: 1, gains: proposal.current.gains });
      }
      // A read-back of what left before the crash comes too late, and changes nothing.
      const { kp, ki, kd, kv, ka } = proposal.proposed!.gains;
      const late = { axisId, revision: applied ? 3 : 2, gains: { kp, ki, kd, kv, ka } };
      expect(await gateway.ask('gains-applied', late)).toEqual({ received: true });
      if (unsure)
        expect(
          await gateway.ask('gains-applied', { axisId, revision: 1, gains: proposal.current.gains }),
        ).toEqual({ received: true });
      const after = await until('the machine is known again', async () => {
        const seen = await look();
        return !seen.restoring && seen;
      });
      expect(after.state).toBe(state.state);
      if (unsure) expect(after.events.at(-1)).toMatchObject({ by: 'service', action: 'gains restored' });
      // No gains left twice: after the restart only those of the running revision were asked for.
      expect(gateway.orders.filter(({ revision }) => revision !== 1)).toEqual([]);
      expect(gateway.orders.length).toBe(unsure ? 1 : 0);
      const { body } = await viewer.get(`/api/v1/axes/${axisId}/tunings`).expect(200);
      expect(
        (body as { items: { revision: number }[] }).items.map(({ revision }) => revision).sort(),
      ).toEqual(applied ? [1, 3] : [1]);
      const chain = await (await restarted.as('admin')).get('/api/v1/audit/chain').expect(200);
      expect(chain.body).toMatchObject({ intact: true });
    } finally {
      gateway.close();
      await restarted.close();
    }
  },
  30_000,
);
