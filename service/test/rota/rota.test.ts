import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { User } from '../../src/people/user.entity.js';
import { RotaService } from '../../src/rota/rota.service.js';
import { addPerson, startPeople, type PeopleApp } from '../people/people-app.js';

const HOUR = 3_600_000;
const DAY = 24 * HOUR;

let people: PeopleApp;
let hall: number;
let yard: number;
const idOf = async (start: string): Promise<number> =>
  (await people.dataSource.getRepository(User).findOneByOrFail({ email: `${start}@tarnwick.example` })).id;
/** A body of one layer. */
const oneLayer = (layer: object) => ({
  layers: [
    { name: 'Week by week', handOverTime: '06:00', rotationDays: 7, startDate: '2026-01-05', ...layer },
  ],
});
const inHours = (hours: number) =>
  new Date(Math.floor(Date.now() / 1000) * 1000 + hours * HOUR).toISOString();

beforeAll(async () => {
  people = await startPeople();
  [hall, yard] = people.siteIds;
});
afterAll(() => people.close());

describe('the rota of a site', () => {
  it('shows two weeks of turns, who is on call now and no gap', async () => {
    const viewer = await people.as('viewer');
    const { body } = await viewer.get(`/api/v1/rota?siteId=${yard}`).expect(200);
    expect(body).toMatchObject({
      siteId: yard,
      timeZone: 'America/New_York',
      layers: [{ handOverTime: '06:00', rotationDays: 7, endDate: null, hours: null }],
      overrides: [],
      gaps: [],
    });
    expect(body.layers[0].members.map(({ name }: { name: string }) => name)).toEqual([
      'Wren Castellow',
      'Saskia Thornby',
      'Idris Pellworth',
      'Tomas Birkwell',
    ]);
    expect(body.shifts.length).toBeGreaterThanOrEqual(2);
    expect(Date.parse(body.shifts[0].from)).toBeLessThanOrEqual(Date.now());
    expect(Date.parse(body.shifts.at(-1).to)).toBeGreaterThanOrEqual(Date.now() + 14 * DAY - HOUR);
    expect(body.onCall).toMatchObject({ userId: body.shifts[0].userId, until: body.shifts[0].to });
    const all = await viewer.get('/api/v1/rota/on-call').expect(200);
    expect(all.body.items.map(({ siteName }: { siteName: string }) => siteName)).toEqual([
      'Kiln Yard',
      'Tile Hall',
    ]);
    expect(all.body.items[0]).toEqual({
      siteId: yard,
      siteName: 'Kiln Yard',
      timeZone: 'America/New_York',
      userId: body.onCall.userId,
      name: body.onCall.name,
      until: body.onCall.until,
    });
  });

  it('is set by an administrator from people who may acknowledge there', async () => {
    const admin = await people.as('admin');
    const [technician, engineer, viewer, administrator] = await Promise.all(
      ['technician', 'engineer', 'viewer', 'admin'].map(idOf),
    );
    const set = (members: unknown, changed: object = {}) =>
      admin
        .put(`/api/v1/rota/${hall}`)
        .send(
          oneLayer({ members, handOverTime: '18:00', rotationDays: 1, startDate: '2026-01-01', ...changed }),
        );
    const { body } = await set([technician, engineer]).expect(200);
    expect(body.layers[0].members.map(({ userId }: { userId: number }) => userId)).toEqual([
      technician,
      engineer,
    ]);
    expect(body.shifts.length).toBeGreaterThanOrEqual(14);
    const wrong = await set([technician, viewer, administrator]).expect(400);
    expect(wrong.body.errors.map(({ message }: { message: string }) => message)).toEqual([
      `Person ${viewer} cannot acknowledge alerts on this site`,
      `Person ${administrator} cannot acknowledge alerts on this site`,
    ]);
    await set([]).expect(400);
    await set([technician], { handOverTime: '24:00' }).expect(400);
    await set([technician], { rotationDays: 0 }).expect(400);
    await set([technician], { startDate: '2026-02-30' }).expect(400);
    await set([technician], { startDate: '2026-01-01T00:00Z' }).expect(400);
    const { body: audit } = await admin.get(`/api/v1/audit?subjectType=rota&subjectId=${hall}`).expect(200);
    expect(audit.items[0]).toMatchObject({
      action: 'rota.changed',
      before: [{ handOverTime: '06:00', rotationDays: 7 }],
      after: [{ handOverTime: '18:00', rotationDays: 1, memberIds: [technician, engineer] }],
    });
  });

  it('is changed by nobody else, and does not exist for people of other sites', async () => {
    const [technician] = await Promise.all(['technician'].map(idOf));
    const body = oneLayer({ members: [technician] });
    for (const who of ['viewer', 'technician', 'engineer', 'approver'])
      await (await people.as(who)).put(`/api/v1/rota/${hall}`).send(body).expect(403);
    await addPerson(people, 'halladmin', [{ siteId: hall, role: 'administrator' }]);
    const admin = await people.as('halladmin');
    await admin.get(`/api/v1/rota?siteId=${yard}`).expect(404);
    await admin.put(`/api/v1/rota/${yard}`).send(body).expect(404);
    await admin.get(`/api/v1/rota/${yard}/notes`).expect(404);
    expect((await admin.get('/api/v1/rota/on-call')).body.items).toHaveLength(1);
    await admin.get('/api/v1/rota').expect(400);
  });

  it('has a gap where the one whose turn it is was disabled or lost their role', async () => {
    const rota = people.app.get(RotaService);
    const gone = await addPerson(people, 'gone', [{ siteId: yard, role: 'technician' }]);
    const admin = await people.as('admin');
    const set = oneLayer({ members: [gone.id] });
    await admin.put(`/api/v1/rota/${yard}`).send(set).expect(200);
    expect(await rota.onCall(yard, new Date())).toMatchObject({ userId: gone.id, email: gone.email });
    await admin.patch(`/api/v1/people/${gone.id}`).send({ disabled: true }).expect(200);
    expect(await rota.onCall(yard, new Date())).toBeNull();
    const { body } = await admin.get(`/api/v1/rota?siteId=${yard}`).expect(200);
    expect(body).toMatchObject({ onCall: null, shifts: [] });
    expect(body.gaps).toHaveLength(1);
    expect((await admin.get('/api/v1/rota/on-call')).body.items[0]).toMatchObject({
      siteId: yard,
      userId: null,
    });
    expect(body.layers[0].members).toEqual([{ userId: gone.id, name: 'gone' }]);
    await admin
      .patch(`/api/v1/people/${gone.id}`)
      .send({ disabled: false, roles: [{ siteId: yard, role: 'viewer' }] })
      .expect(200);
    expect(await rota.onCall(yard, new Date())).toBeNull();
  });

  it('says until when somebody is on call, over a clock change', async () => {
    const [technician, engineer] = await Promise.all(['technician', 'engineer'].map(idOf));
    const admin = await people.as('admin');
    await admin
      .put(`/api/v1/rota/${hall}`)
      .send(oneLayer({ members: [technician, engineer], rotationDays: 1, startDate: '2027-03-01' }))
      .expect(200);
    const rota = people.app.get(RotaService);
    // Clocks in London go forward on 28 March 2027.
    const night = await rota.onCall(hall, new Date('2027-03-28T00:30:00Z'));
    expect(night).toMatchObject({ userId: technician, until: new Date('2027-03-28T05:00:00Z') });
    expect((await rota.onCall(hall, new Date('2027-03-28T05:00:00Z')))?.userId).toBe(engineer);
    expect(await rota.onCall(hall, new Date('2027-02-28T12:00:00Z'))).toBeNull();
  });
});

describe('standing in', () => {
  it('is open to people for their own part, to administrators for all', async () => {
    const [technician, wren, idris] = await Promise.all(
      ['technician', 'wren.castellow', 'idris.pellworth'].map(idOf),
    );
    const admin = await people.as('admin');
    await admin
      .put(`/api/v1/rota/${hall}`)
      .send(oneLayer({ members: [technician] }))
      .expect(200);
    const add = async (who: string, userId: number | undefined, from: string, to: string) =>
      (await people.as(who))
        .post(`/api/v1/rota/${hall}/overrides`)
        .send({ userId, from, to, reason: 'Swap' });
    // Taking over oneself, and handing on one's own time.
    expect((await add('wren.castellow', wren, inHours(-1), inHours(2))).status).toBe(201);
    expect((await add('technician', idris, inHours(48), inHours(50))).status).toBe(201);
    // Not somebody else's time to a third.
    expect((await add('wren.castellow', idris, inHours(60), inHours(62))).status).toBe(403);
    expect((await add('technician', idris, inHours(1), inHours(3))).status).toBe(403);
    expect((await add('viewer', wren, inHours(60), inHours(62))).status).toBe(403);
    const { body } = await add('admin', idris, inHours(1), inHours(3));
    expect(body.onCall).toMatchObject({ userId: wren, email: 'wren.castellow@tarnwick.example' });
    expect(body.overrides).toHaveLength(3);
    expect(body.shifts.slice(0, 3)).toMatchObject([
      { userId: wren, override: true },
      { userId: idris, override: true, from: body.overrides[2].from, to: body.overrides[2].to },
      { userId: technician, override: false, from: body.overrides[2].to },
    ]);
    const remove = async (who: string, i: number) =>
      (await (await people.as(who)).delete(`/api/v1/rota/${hall}/overrides/${body.overrides[i].id}`)).status;
    expect(await remove('engineer', 0)).toBe(403);
    expect(await remove('wren.castellow', 0)).toBe(204);
    expect(await remove('wren.castellow', 0)).toBe(404);
    expect(await remove('idris.pellworth', 1)).toBe(204);
    expect(await remove('admin', 2)).toBe(204);
    const after = await admin.get(`/api/v1/rota?siteId=${hall}`).expect(200);
    expect(after.body).toMatchObject({ overrides: [], onCall: { userId: technician } });
  });

  it('is refused backwards, in the past, for too long, and by people who cannot be on call', async () => {
    const [technician, viewer] = await Promise.all(['technician', 'viewer'].map(idOf));
    const admin = await people.as('admin');
    const refused = async (body: object) => {
      const answer = await admin.post(`/api/v1/rota/${hall}/overrides`).send({ reason: 'Swap', ...body });
      expect(answer.status).toBe(400);
      return answer.body.errors.map(({ path }: { path: string }) => path);
    };
    expect(await refused({ userId: technician, from: inHours(2), to: inHours(2) })).toEqual(['to']);
    expect(await refused({ userId: technician, from: inHours(-3), to: inHours(-2) })).toEqual(['to']);
    expect(await refused({ userId: technician, from: inHours(0), to: inHours(93 * 24) })).toEqual(['to']);
    expect(await refused({ userId: viewer, from: inHours(1), to: inHours(2) })).toEqual(['userId']);
    expect(await refused({ userId: '3', from: 'soon', to: inHours(2) })).toEqual(['userId', 'from']);
    expect(await refused({ userId: technician, from: inHours(1), to: inHours(2), reason: '  ' })).toEqual([
      'reason',
    ]);
  });
});

describe('hand-over notes', () => {
  it('are left by who works there and read by all of the site, newest first', async () => {
    const technician = await people.as('technician');
    const { body } = await technician
      .post(`/api/v1/rota/${hall}/notes`)
      .send({ text: '  The ejector was noisy at 03:00. ' })
      .expect(201);
    expect(body).toEqual({
      id: expect.any(Number),
      at: expect.stringMatching(/Z$/),
      by: 'Tomas Birkwell',
      text: 'The ejector was noisy at 03:00.',
    });
    const viewer = await people.as('viewer');
    await viewer.post(`/api/v1/rota/${hall}/notes`).send({ text: 'x' }).expect(403);
    await technician.post(`/api/v1/rota/${hall}/notes`).send({ text: ' ' }).expect(400);
    const first = (await viewer.get(`/api/v1/rota/${hall}/notes?limit=2`).expect(200)).body;
    expect(first.items[0]).toEqual(body);
    expect(first.items).toHaveLength(2);
    const rest = (await viewer.get(`/api/v1/rota/${hall}/notes?limit=2&cursor=${first.nextCursor}`)).body;
    expect(rest.items).toHaveLength(1);
    expect(rest.nextCursor).toBeNull();
  });
});
