import ICAL from 'ical.js';
import request from 'supertest';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { Mail } from '../../src/notifications/mail.entity.js';
import { User } from '../../src/people/user.entity.js';
import { RotaOverride } from '../../src/rota/rota-override.entity.js';
import { readRotaCsv } from '../../src/rota/rota-csv.js';
import { RotaService } from '../../src/rota/rota.service.js';
import { addPerson, startPeople, type PeopleApp } from '../people/people-app.js';

const HOUR = 3_600_000;
const DAY = 24 * HOUR;

let people: PeopleApp;
const agents = new Map<string, ReturnType<PeopleApp['as']>>();
/** Signed in once each. */
function as(who: string): ReturnType<PeopleApp['as']> {
  const agent = agents.get(who) ?? people.as(who);
  agents.set(who, agent);
  return agent;
}
let hall: number;
let yard: number;
let tomas: User;
let wren: User;
const personOf = (start: string): Promise<User> =>
  people.dataSource.getRepository(User).findOneByOrFail({ email: `${start}@tarnwick.example` });
/** Midnight UTC, some days ahead. */
const midnight = Math.ceil(Date.now() / DAY) * DAY;
const dayAhead = (days: number, hour = 0): string =>
  new Date(midnight + days * DAY + hour * HOUR).toISOString();
const overridesOf = (siteId: number) =>
  people.dataSource.getRepository(RotaOverride).find({ where: { siteId }, order: { from: 'ASC' } });

beforeAll(async () => {
  people = await startPeople();
  [hall, yard] = people.siteIds;
  [tomas, wren] = await Promise.all([personOf('technician'), personOf('wren.castellow')]);
});
afterAll(() => people.close());

/** Tomas and Wren take turns of a day from 06:00 in London; the next whole turn ahead is whose. */
beforeEach(async () => {
  await people.dataSource.query('DELETE FROM "rota_override"');
  await people.dataSource.query('DELETE FROM "rota_swap"');
  await (
    await as('admin')
  )
    .put(`/api/v1/rota/${hall}`)
    .send({
      layers: [
        {
          name: 'Day by day',
          members: [tomas.id, wren.id],
          handOverTime: '06:00',
          rotationDays: 1,
          startDate: '2026-01-01',
        },
      ],
    })
    .expect(200);
});

/** Hours of the afternoon (London) of a day on which a person is on call, at least two days ahead. */
async function ownAfternoon(userId: number): Promise<{ from: string; to: string }> {
  for (let day = 2; ; day++) {
    const onCall = await people.app.get(RotaService).onCall(hall, new Date(dayAhead(day, 12)));
    if (onCall?.userId === userId) return { from: dayAhead(day, 12), to: dayAhead(day, 15) };
  }
}

describe('a swap', () => {
  const ask = async (who: string, body: object) =>
    (await as(who)).post(`/api/v1/rota/${hall}/swaps`).send({ reason: 'Choir', ...body });
  const answer = async (who: string, id: number, how: string) =>
    (await as(who)).post(`/api/v1/rota/${hall}/swaps/${id}/${how}`);

  it('changes nothing when it is asked, both ways at once when it is accepted, and is mailed to either', async () => {
    const give = await ownAfternoon(tomas.id);
    const take = await ownAfternoon(wren.id);
    const asked = await ask('technician', {
      askedOfId: wren.id,
      ...give,
      returnFrom: take.from,
      returnTo: take.to,
    });
    expect(asked.status).toBe(201);
    expect(asked.body.swaps).toEqual([
      {
        id: expect.any(Number),
        askedBy: { userId: tomas.id, name: tomas.name },
        askedOf: { userId: wren.id, name: wren.name },
        ...give,
        inReturn: take,
        reason: 'Choir',
      },
    ]);
    expect(await overridesOf(hall)).toEqual([]);
    const { id } = asked.body.swaps[0];
    expect((await answer('technician', id, 'accept')).status).toBe(403);
    expect((await answer('idris.pellworth', id, 'accept')).status).toBe(403);
    expect((await answer('wren.castellow', id, 'withdraw')).status).toBe(403);
    const accepted = await answer('wren.castellow', id, 'accept');
    expect(accepted.status).toBe(200);
    expect(accepted.body.swaps).toEqual([]);
    expect(await overridesOf(hall)).toHaveLength(2);
    const rota = people.app.get(RotaService);
    expect((await rota.onCall(hall, new Date(give.from)))?.userId).toBe(wren.id);
    expect((await rota.onCall(hall, new Date(take.from)))?.userId).toBe(tomas.id);
    expect((await rota.onCall(hall, new Date(give.to)))?.userId).toBe(tomas.id);
    expect((await answer('wren.castellow', id, 'accept')).status).toBe(409);
    const mails = await people.dataSource.getRepository(Mail).find({ order: { id: 'ASC' } });
    expect(mails.map(({ to, subject }) => `${to}: ${subject}`)).toEqual([
      'wren.castellow@tarnwick.example: Tomas Birkwell asks you to swap on-call time',
      'technician@tarnwick.example: Wren Castellow has accepted the swap',
    ]);
    const audit = await (await as('admin')).get(`/api/v1/audit?subjectType=rota&subjectId=${hall}`);
    expect(audit.body.items.slice(0, 4).map(({ action }: { action: string }) => action)).toEqual([
      'rota.swap-accepted',
      'rota.override-added',
      'rota.override-added',
      'rota.swap-asked',
    ]);
  });

  it('is declined or withdrawn without a trace in the rota', async () => {
    const give = await ownAfternoon(tomas.id);
    for (const [who, how] of [
      ['wren.castellow', 'decline'],
      ['technician', 'withdraw'],
      ['admin', 'withdraw'],
    ] as const) {
      const { body } = await ask('technician', { askedOfId: wren.id, ...give });
      expect((await answer(who, body.swaps[0].id, how)).body.swaps).toEqual([]);
      expect((await answer('wren.castellow', body.swaps[0].id, 'accept')).status).toBe(409);
    }
    expect(await overridesOf(hall)).toEqual([]);
  });

  it('is refused for time that is not one’s own, that is past, half given, or with oneself', async () => {
    const give = await ownAfternoon(tomas.id);
    const theirs = await ownAfternoon(wren.id);
    const viewer = await personOf('viewer');
    const paths = async (body: object, who = 'technician') => {
      const answered = await ask(who, { askedOfId: wren.id, ...give, ...body });
      expect(answered.status).toBe(400);
      return answered.body.errors.map(({ path }: { path: string }) => path);
    };
    expect(await paths(theirs)).toEqual(['from']);
    expect(await paths({ from: give.to, to: give.from })).toEqual(['to']);
    expect(await paths({ from: dayAhead(-3), to: dayAhead(-2) })).toEqual(['from']);
    expect(await paths({ returnFrom: theirs.from })).toEqual(['returnTo']);
    expect(await paths({ returnFrom: give.from, returnTo: give.to })).toEqual(['returnFrom']);
    expect(await paths({ askedOfId: tomas.id })).toEqual(['askedOfId']);
    expect(await paths({ askedOfId: viewer.id })).toEqual(['askedOfId']);
    expect((await ask('viewer', { askedOfId: wren.id, ...give })).status).toBe(403);
  });

  it('is refused when the rota has changed since it was asked', async () => {
    const give = await ownAfternoon(tomas.id);
    const { body } = await ask('technician', { askedOfId: wren.id, ...give });
    const idris = await personOf('idris.pellworth');
    await (
      await as('admin')
    )
      .post(`/api/v1/rota/${hall}/overrides`)
      .send({ userId: idris.id, ...give, reason: 'Training' })
      .expect(201);
    const refused = await answer('wren.castellow', body.swaps[0].id, 'accept');
    expect(refused.status).toBe(409);
    expect(refused.body.detail).toMatch(/Tomas Birkwell is not on call all through that time/);
    expect(await overridesOf(hall)).toHaveLength(1);
  });
});

describe('the rota as a file', () => {
  const send = async (text: string, who = 'admin') =>
    (await as(who)).post(`/api/v1/rota/${hall}/overrides.csv`).attach('file', Buffer.from(text), 'rota.csv');

  it('goes out with the site’s clock, and comes back as overrides, twice as once', async () => {
    const viewer = await as('viewer');
    const query = `from=${dayAhead(2)}&to=${dayAhead(4)}`;
    const out = await viewer.get(`/api/v1/rota/${hall}/shifts.csv?${query}`).expect(200);
    expect(out.headers['content-type']).toMatch(/^text\/csv/);
    const [head, ...lines] = out.text.trim().split('\r\n');
    expect(head).toBe('from,to,name,email,by,reason');
    expect(lines).toHaveLength(3);
    expect(lines[0]).toMatch(
      /^\d{4}-\d\d-\d\dT06:00:00\+0[01]:00,\S+,(Tomas Birkwell|Wren Castellow),\S+@tarnwick\.example,Day by day,$/,
    );
    expect((await send(out.text, 'technician')).status).toBe(403);
    expect((await send(out.text)).body).toEqual({ added: 3, alreadyThere: 0 });
    expect((await send(out.text)).body).toEqual({ added: 0, alreadyThere: 3 });
    const stored = await overridesOf(hall);
    expect(stored.map(({ from }) => from.toISOString())).toEqual(
      lines.map((line) => new Date(line.split(',')[0]!).toISOString()),
    );
    await viewer.get(`/api/v1/rota/${hall}/shifts.csv?from=${dayAhead(2)}&to=${dayAhead(900)}`).expect(400);
  });

  it('with one bad line stores nothing and names every bad line', async () => {
    const refused = await send(
      [
        'from;to;email;reason',
        `${dayAhead(2)};${dayAhead(3)};technician@tarnwick.example;Fine`,
        `${dayAhead(4)};${dayAhead(3)};technician@tarnwick.example;Backwards`,
        '',
        `soon;${dayAhead(5)};technician@tarnwick.example;Never`,
        `${dayAhead(5)};${dayAhead(6)};viewer@tarnwick.example;Not on call`,
        '2026-02-30 06:00;2026-02-31 06:00;;No such day',
        `${dayAhead(2, 5)};${dayAhead(2, 6)};wren.castellow@tarnwick.example;Over the first`,
        'too;few',
      ].join('\n'),
    );
    expect(refused.status).toBe(400);
    expect(refused.body.detail).toBe('Nothing was stored.');
    expect(
      refused.body.errors.map(
        ({ path, message }: { path: string; message: string }) => `${path}: ${message}`,
      ),
    ).toEqual([
      'line 3: It must end after it begins',
      'line 5: from "soon" is no time such as 2027-01-04 06:00',
      'line 6: viewer@tarnwick.example cannot acknowledge alerts on this site',
      expect.stringMatching(/^line 7: from "2026-02-30 06:00".*; to "2026-02-31 06:00".*; email is missing$/),
      'line 8: overlaps line 2',
      expect.stringMatching(/^line 9: 2 fields where the header has 4/),
    ]);
    expect(await overridesOf(hall)).toEqual([]);
    expect((await send('from,to\n1,2')).body.errors).toEqual([
      { path: 'file', message: expect.stringMatching(/^has no column email/) },
    ]);
    expect((await send('')).status).toBe(400);
    expect((await send('x'.repeat(600 * 1024))).status).toBe(413);
    await (await as('admin')).post(`/api/v1/rota/${hall}/overrides.csv`).expect(400);
  });

  it('reads times without an offset on the site’s clock, also over a clock change', () => {
    const { lines, problems } = readRotaCsv(
      'from,to,email\r\n2027-03-27 22:00,2027-03-28 06:00,A@x.example\r\n2027-03-29T06:00:00+02:00,2027-03-29T06:00Z,a@x.example\r\n',
      'Europe/London',
    );
    expect(problems).toEqual([]);
    expect(lines.map(({ from, to, email }) => [from.toISOString(), to.toISOString(), email])).toEqual([
      ['2027-03-27T22:00:00.000Z', '2027-03-28T05:00:00.000Z', 'a@x.example'],
      ['2027-03-29T04:00:00.000Z', '2027-03-29T06:00:00.000Z', 'a@x.example'],
    ]);
  });
});

describe('the calendar feed', () => {
  const eventsOf = (text: string) =>
    new ICAL.Component(ICAL.parse(text) as unknown[]).getAllSubcomponents('vevent').map((one) => {
      const event = new ICAL.Event(one);
      return {
        uid: event.uid,
        summary: event.summary,
        from: event.startDate.toJSDate(),
        to: event.endDate.toJSDate(),
      };
    });
  const read = (url: string) => request(people.app.getHttpServer()).get(new URL(url).pathname);

  it('is the rota, as a parser that is not ours reads it, without signing in', async () => {
    const viewer = await as('viewer');
    const { body: made } = await viewer.post(`/api/v1/rota/${hall}/feeds`).send({ own: false }).expect(201);
    const { text: ics, headers } = await read(made.url).expect(200);
    expect(headers['content-type']).toMatch(/^text\/calendar/);
    const events = eventsOf(ics);
    const { shifts } = await people.app
      .get(RotaService)
      .view(
        { id: 0, name: '', email: '', owner: false, roles: [{ siteId: hall, role: 'viewer' }] },
        hall,
        new Date(Date.now() - 7 * DAY),
        new Date(Date.now() + 90 * DAY),
      );
    expect(events.map(({ from, to }) => [+from, +to])).toEqual(shifts.map(({ from, to }) => [+from, +to]));
    expect(new Set(events.map(({ uid }) => uid)).size).toBe(events.length);
    expect(new Set(events.map(({ summary }) => summary))).toEqual(
      new Set(['Tomas Birkwell on call, Tile Hall', 'Wren Castellow on call, Tile Hall']),
    );
    const { body: list } = await viewer.get('/api/v1/rota/feeds').expect(200);
    expect(list.items).toMatchObject([{ id: made.id, own: false, siteName: 'Tile Hall' }]);
    expect(list.items[0].lastReadAt).not.toBeNull();
    expect(JSON.stringify(list)).not.toContain(made.url.split('/').at(-1).replace('.ics', ''));
  });

  it('of one’s own has only one’s own; one of a site names the gaps', async () => {
    const technician = await as('technician');
    const { body: own } = await technician.post(`/api/v1/rota/${hall}/feeds`).send({ own: true }).expect(201);
    const names = eventsOf((await read(own.url)).text).map(({ summary }) => summary);
    expect(new Set(names)).toEqual(new Set(['Tomas Birkwell on call, Tile Hall']));
    await (await as('admin')).put(`/api/v1/rota/${yard}`).send({ layers: [] }).expect(200);
    const { body: all } = await technician.post(`/api/v1/rota/${yard}/feeds`).send({ own: false });
    expect(eventsOf((await read(all.url)).text).map(({ summary }) => summary)).toEqual([
      'NOBODY on call, Kiln Yard',
    ]);
  });

  it('ends when it is taken back by its person, and when the person leaves', async () => {
    const leaver = await addPerson(people, 'leaver', [{ siteId: hall, role: 'technician' }]);
    const agent = await as('leaver');
    const feed = async () =>
      (await agent.post(`/api/v1/rota/${hall}/feeds`).send({ own: false }).expect(201)).body;
    const [first, second] = [await feed(), await feed()];
    await (await as('admin')).delete(`/api/v1/rota/feeds/${first.id}`).expect(404);
    await agent.delete(`/api/v1/rota/feeds/${first.id}`).expect(204);
    await agent.delete(`/api/v1/rota/feeds/${first.id}`).expect(404);
    await read(first.url).expect(404);
    await read(second.url).expect(200);
    await people.dataSource.getRepository(User).update(leaver.id, { disabled: true });
    await read(second.url).expect(404);
    await read(second.url.replace(/[^/]{8}\.ics$/, 'AAAAAAAA.ics')).expect(404);
    await (await as('viewer')).post('/api/v1/rota/999/feeds').send({ own: true }).expect(404);
  });
});
