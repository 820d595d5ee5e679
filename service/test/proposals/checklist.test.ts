import { afterAll, beforeAll, expect, test } from 'vitest';
import { CHECKLIST } from '../../src/proposals/checklist.js';
import { ProposalMailService } from '../../src/proposals/proposal-mail.service.js';
import { DEMO_PASSWORD, startService, type Caller, type Service } from '../support/start-service.js';
import { ProposalBench, type ProposalBody } from './proposal-bench.js';

let service: Service;
let admin: Caller;
let engineer: Caller;
let technician: Caller;
let hall: number;

beforeAll(async () => {
  service = await startService();
  await service.addPerson('elsewhere', [{ siteId: service.siteIds[1], role: 'administrator' }]);
  [admin, engineer, technician] = (await Promise.all(
    ['admin', 'engineer', 'technician'].map(service.as),
  )) as [Caller, Caller, Caller];
  hall = service.siteIds[0];
});
afterAll(() => service?.close());

const put = (who: Caller, items: unknown): ReturnType<Caller['put']> =>
  who.put(`/api/v1/sites/${hall}/checklist`).send({ items });

test('an administrator adds to the checklist of a site and can take nothing away that holds everywhere', async () => {
  const list = async (): Promise<{ always: object[]; own: { key: string; text: string }[] }> =>
    (await technician.get(`/api/v1/sites/${hall}/checklist`).expect(200)).body as never;
  expect(await list()).toMatchObject({ always: CHECKLIST, own: [] });
  await put(engineer, ['x']).expect(403);
  await put(await service.as('elsewhere'), ['x']).expect(404);
  for (const [items, path] of [
    [['', 'b'], 'items'],
    [['same', ' same '], 'items'],
    [['x'.repeat(301)], 'items'],
    [[3], 'items'],
    ['x', 'items'],
    [Array.from({ length: 21 }, (_, i) => `item ${i}`), 'items'],
  ] as const) {
    const { body } = await put(admin, items).expect(400);
    expect((body as { errors: { path: string }[] }).errors[0]!.path).toContain(path);
  }
  await put(admin, ['The kiln car is chocked.', ' The hoist is parked. ']).expect(200);
  const [chocked, parked] = (await list()).own;
  expect([chocked!.text, parked!.text]).toEqual(['The kiln car is chocked.', 'The hoist is parked.']);

  // The other site keeps its own; an altered text is a new item with another key.
  const other = await admin.get(`/api/v1/sites/${service.siteIds[1]}/checklist`).expect(200);
  expect((other.body as { own: object[] }).own).toEqual([]);
  await put(admin, ['The hoist is parked.', 'The kiln car is chocked on both sides.']).expect(200);
  const { always, own } = await list();
  expect(always).toEqual(CHECKLIST);
  expect(own[0]).toEqual(parked);
  expect(own[1]!.key).not.toBe(chocked!.key);
  const record = await admin.get(`/api/v1/audit?subjectType=site&subjectId=${hall}`).expect(200);
  expect((record.body as { items: object[] }).items[0]).toMatchObject({
    action: 'site.checklist-changed',
    before: ['The kiln car is chocked.', 'The hoist is parked.'],
    after: ['The hoist is parked.', 'The kiln car is chocked on both sides.'],
  });
});

test('applying wants the site’s items as well; the record keeps the words; people are reminded once', async () => {
  await put(admin, ['The hoist is parked.']).expect(200);
  const bench = await ProposalBench.start(service, 100);
  try {
    await bench.stream(45);
    const made = await engineer
      .post('/api/v1/proposals')
      .send({ axisId: bench.axis.axisId, pattern: { kind: 'triple', lambda: 26 } })
      .expect(201);
    const { id, checklist } = made.body as ProposalBody;
    expect(checklist.map(({ text }) => text)).toEqual([
      ...CHECKLIST.map(({ text }) => text),
      'The hoist is parked.',
    ]);
    const step = (who: Caller, name: string, body: object = {}): ReturnType<Caller['post']> =>
      who.post(`/api/v1/proposals/${id}/${name}`).send(body);
    await step(engineer, 'submit').expect(200);
    await step(await service.as('approver'), 'approve').expect(200);

    // Reminders: a day before, an hour before, each once to each person; none for a window of next week.
    const mail = service.app.get(ProposalMailService);
    const from = Date.now() + 7 * 86_400_000;
    const window = { from: new Date(from).toISOString(), to: new Date(from + 3_600_000).toISOString() };
    await step(engineer, 'schedule', window).expect(200);
    const reminders = async (): Promise<string[]> =>
      (
        (await service.dataSource.query(
          `SELECT "to" FROM "mail_outbox" WHERE "subject" LIKE '%maintenance window%' ORDER BY "id"`,
        )) as { to: string }[]
      ).map(({ to }) => to);
    await mail.remind();
    expect(await reminders()).toEqual([]);
    for (const before of [24, 23, 2]) await mail.remind(new Date(from - before * 3_600_000 + 1));
    const told = await reminders();
    expect(new Set(told).size).toBe(told.length);
    expect(told).toEqual(expect.arrayContaining(['engineer@tarnwick.example', 'approver@tarnwick.example']));
    for (const minutes of [60, 30, -10]) await mail.remind(new Date(from - minutes * 60_000 + 1));
    expect(await reminders()).toHaveLength(2 * told.length);
    await mail.remind(new Date(from + 3_600_001));
    expect(await reminders()).toHaveLength(2 * told.length);

    const now = { from: new Date(Date.now() - 1000), to: new Date(Date.now() + 600_000) };
    await step(engineer, 'schedule', now).expect(200);
    await bench.maintain(technician, true);
    await bench.stream(4, false);
    const apply = (keys: { key: string }[]): ReturnType<Caller['post']> =>
      step(technician, 'apply', {
        checklist: Object.fromEntries(keys.map(({ key }) => [key, true])),
        password: DEMO_PASSWORD,
      });
    const refused = await apply([...CHECKLIST]).expect(400);
    expect((refused.body as { errors: object[] }).errors).toEqual([
      { path: `checklist.${checklist.at(-1)!.key}`, message: 'must be confirmed: The hoist is parked.' },
    ]);
    // A key of an item that has been altered since confirms nothing.
    await put(admin, ['The hoist is parked and locked.']).expect(200);
    await apply(checklist).expect(400);
    const fresh = await bench.get(id);
    await apply(fresh.checklist).expect(200);
    const record = await engineer
      .get(`/api/v1/audit?subjectType=proposal&subjectId=${id}&limit=1`)
      .expect(200);
    expect((record.body as { items: object[] }).items[0]).toMatchObject({
      action: 'proposal.gains-sent',
      after: { state: 'applying', checklist: fresh.checklist },
    });
  } finally {
    bench.gateway.close();
  }
}, 30_000);

test('a window that closes without the change ends the proposal', async () => {
  const bench = await ProposalBench.start(service, 100);
  try {
    await bench.stream(45);
    const made = await engineer
      .post('/api/v1/proposals')
      .send({ axisId: bench.axis.axisId, pattern: { kind: 'triple', lambda: 26 } })
      .expect(201);
    const { id } = made.body as ProposalBody;
    await engineer.post(`/api/v1/proposals/${id}/submit`).expect(200);
    await (await service.as('approver')).post(`/api/v1/proposals/${id}/approve`).expect(200);
    const window = { from: new Date(Date.now() - 1000), to: new Date(Date.now() + 60_000) };
    await engineer.post(`/api/v1/proposals/${id}/schedule`).send(window).expect(200);
    // As if the minute had passed.
    await service.dataSource.query(
      `UPDATE "proposal" SET "windowTo" = datetime('now', '-1 seconds') WHERE "id" = ?`,
      [id],
    );
    const expired = await bench.untilState(id, 'expired');
    expect(expired.events.at(-1)).toMatchObject({ by: 'service', action: 'expired' });
    await bench.maintain(technician, true);
    await bench.stream(4, false);
    const late = await technician
      .post(`/api/v1/proposals/${id}/apply`)
      .send({
        checklist: Object.fromEntries(expired.checklist.map(({ key }) => [key, true])),
        password: DEMO_PASSWORD,
      })
      .expect(409);
    expect((late.body as { detail: string }).detail).toContain('expired');
    expect(bench.gateway.orders).toEqual([]);
  } finally {
    bench.gateway.close();
  }
}, 30_000);
