import request from 'supertest';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { Mail } from '../../src/notifications/mail.entity.js';
import { Invitation } from '../../src/people/invitation.entity.js';
import { InvitationService } from '../../src/people/invitation.service.js';
import { User } from '../../src/people/user.entity.js';
import { addPerson, startPeople, type PeopleApp } from './people-app.js';

let people: PeopleApp;
let hall: number;
let yard: number;
const http = () => request(people.app.getHttpServer());
const mailsTo = (to: string) =>
  people.dataSource.getRepository(Mail).find({ where: { to }, order: { id: 'ASC' } });
const tokenIn = (mail: Mail | undefined): string => /\/invitation\/([\w-]{43})/.exec(mail?.text ?? '')![1]!;
const signIn = (email: string, password: string) =>
  http().post('/api/v1/auth/sign-in').send({ email, password });

beforeAll(async () => {
  people = await startPeople();
  [hall, yard] = people.siteIds;
});
afterAll(() => people.close());

describe('invitation', () => {
  it('is mailed, shows what it offers, makes the account once, and signs in', async () => {
    const admin = await people.as('admin');
    const invited = await admin
      .post('/api/v1/people/invitations')
      .send({
        email: 'New.Hand@tarnwick.example',
        name: 'Nell <Hand>',
        roles: [{ siteId: hall, role: 'technician' }],
      })
      .expect(201);
    expect(invited.body).toEqual({
      id: expect.any(Number),
      email: 'new.hand@tarnwick.example',
      name: 'Nell <Hand>',
      roles: [{ siteId: hall, role: 'technician' }],
      expiresAt: expect.stringMatching(/^\d{4}-.*Z$/),
    });
    expect((await admin.get('/api/v1/people/invitations').expect(200)).body.items).toContainEqual(
      invited.body,
    );
    const [mail] = await mailsTo('new.hand@tarnwick.example');
    expect(mail?.text).toContain('Tile Hall: technician');
    expect(mail?.text).toContain('http://polewright.test/invitation/');
    expect(mail?.html).toContain('Nell &lt;Hand&gt;');
    const token = tokenIn(mail);
    expect(await people.dataSource.getRepository(Invitation).existsBy({ tokenHash: token })).toBe(false);
    expect((await http().get(`/api/v1/invitations/${token}`).expect(200)).body).toEqual({
      purpose: 'invitation',
      name: 'Nell <Hand>',
      email: 'new.hand@tarnwick.example',
      existing: false,
      siteRoles: [{ siteName: 'Tile Hall', role: 'technician' }],
    });
    const accept = () =>
      http()
        .post(`/api/v1/invitations/${token}/accept`)
        .send({ name: 'Nell Hand', password: 'a long enough one' });
    const short = await http()
      .post(`/api/v1/invitations/${token}/accept`)
      .send({ name: 'Nell Hand', password: 'short' })
      .expect(400);
    expect(short.body.errors[0].path).toBe('password');
    const answers = await Promise.all([accept(), accept()]);
    expect(answers.map(({ status }) => status).sort()).toEqual([200, 410]);
    const session = answers.find(({ status }) => status === 200)!;
    expect(session.body.user).toMatchObject({
      name: 'Nell Hand',
      roles: [{ siteId: hall, role: 'technician' }],
    });
    expect(session.headers['set-cookie']?.[0]).toMatch(/^polewright_refresh=/);
    await http().get('/api/v1/auth/me').auth(session.body.accessToken, { type: 'bearer' }).expect(200);
    await accept().expect(410);
    await http().get(`/api/v1/invitations/${token}`).expect(410);
    await signIn('new.hand@tarnwick.example', 'a long enough one').expect(200);
    expect((await admin.get('/api/v1/people/invitations')).body.items).toEqual([]);
  });

  it('can be withdrawn, runs out, and an unknown link is none', async () => {
    const admin = await people.as('admin');
    const invite = async (email: string) => {
      const { body } = await admin
        .post('/api/v1/people/invitations')
        .send({ email, name: 'Late Comer', roles: [{ siteId: yard, role: 'viewer' }] })
        .expect(201);
      return { id: body.id as number, token: tokenIn((await mailsTo(email))[0]) };
    };
    const withdrawn = await invite('withdrawn@tarnwick.example');
    await admin.delete(`/api/v1/people/invitations/${withdrawn.id}`).expect(204);
    await admin.delete(`/api/v1/people/invitations/${withdrawn.id}`).expect(404);
    await http().get(`/api/v1/invitations/${withdrawn.token}`).expect(410);
    const late = await invite('late@tarnwick.example');
    await people.dataSource
      .getRepository(Invitation)
      .update(late.id, { expiresAt: new Date(Date.now() - 1) });
    await http()
      .post(`/api/v1/invitations/${late.token}/accept`)
      .send({ name: 'Late Comer', password: 'a long enough one' })
      .expect(410);
    await http().get('/api/v1/invitations/nothing').expect(404);
  });

  it('adds roles to an account that exists only against its present password', async () => {
    const person = await addPerson(people, 'yardhand', [{ siteId: yard, role: 'engineer' }]);
    const hallAdmin = await addPerson(people, 'halladmin', [{ siteId: hall, role: 'administrator' }]);
    const admin = await people.as('halladmin');
    await admin
      .post('/api/v1/people/invitations')
      .send({ email: person.email, name: 'yardhand', roles: [{ siteId: hall, role: 'viewer' }] })
      .expect(201);
    const token = tokenIn((await mailsTo(person.email))[0]);
    expect((await http().get(`/api/v1/invitations/${token}`)).body.existing).toBe(true);
    const accept = (password: string) =>
      http().post(`/api/v1/invitations/${token}/accept`).send({ name: 'Somebody Else', password });
    await accept('somebody else picks it').expect(401);
    const { body } = await accept('polewright-demo').expect(200);
    expect(body.user).toMatchObject({
      name: 'yardhand',
      roles: [
        { siteId: hall, role: 'viewer' },
        { siteId: yard, role: 'engineer' },
      ],
    });
    const again = await admin
      .post('/api/v1/people/invitations')
      .send({ email: person.email, name: 'yardhand', roles: [{ siteId: hall, role: 'approver' }] })
      .expect(409);
    expect(again.body.detail).toMatch(/has a role on this site already/);
    const audit = await admin.get('/api/v1/audit').expect(200);
    expect(audit.body.items.slice(0, 2)).toMatchObject([
      { action: 'invitation.accepted', userId: person.id, siteId: hall },
      { action: 'person.invited', userId: hallAdmin.id, siteId: hall },
    ]);
  });

  it('is refused for sites of others, for roles that do not exist, and to anybody but administrators', async () => {
    await addPerson(people, 'onlyhall', [
      { siteId: hall, role: 'administrator' },
      { siteId: yard, role: 'approver' },
    ]);
    const admin = await people.as('onlyhall');
    const send = (agent: typeof admin, roles: unknown) =>
      agent.post('/api/v1/people/invitations').send({ email: 'x@tarnwick.example', name: 'X', roles });
    await send(admin, [{ siteId: yard, role: 'viewer' }]).expect(403);
    await send(admin, [{ siteId: hall, role: 'king' }]).expect(400);
    await send(admin, []).expect(400);
    await send(admin, [
      { siteId: hall, role: 'viewer' },
      { siteId: hall, role: 'approver' },
    ]).expect(400);
    for (const who of ['viewer', 'technician', 'engineer', 'approver']) {
      const agent = await people.as(who);
      await send(agent, [{ siteId: hall, role: 'viewer' }]).expect(403);
      await agent.get('/api/v1/people/invitations').expect(403);
      await agent.get('/api/v1/people').expect(403);
    }
    expect(await mailsTo('x@tarnwick.example')).toEqual([]);
  });
});

describe('password reset', () => {
  const ask = (email: string) => http().post('/api/v1/auth/password-reset').send({ email }).expect(204);

  it('answers the same for everybody and mails only who has an account, once a minute', async () => {
    await ask('nobody@tarnwick.example');
    await ask('Viewer@tarnwick.example');
    await ask('viewer@tarnwick.example');
    expect(await mailsTo('nobody@tarnwick.example')).toEqual([]);
    expect(await mailsTo('viewer@tarnwick.example')).toHaveLength(1);
  });

  it('sets the new password once and ends every session', async () => {
    const before = await signIn('engineer@tarnwick.example', 'polewright-demo').expect(200);
    await ask('engineer@tarnwick.example');
    const token = tokenIn((await mailsTo('engineer@tarnwick.example'))[0]);
    expect((await http().get(`/api/v1/invitations/${token}`).expect(200)).body).toMatchObject({
      purpose: 'password-reset',
      email: 'engineer@tarnwick.example',
      existing: false,
    });
    const accept = () =>
      http().post(`/api/v1/invitations/${token}/accept`).send({ password: 'a newly chosen one' });
    const { body } = await accept().expect(200);
    expect(body.user.name).toBe('Ines Harrowgate');
    await accept().expect(410);
    await http().get('/api/v1/auth/me').auth(before.body.accessToken, { type: 'bearer' }).expect(401);
    await signIn('engineer@tarnwick.example', 'polewright-demo').expect(401);
    await signIn('engineer@tarnwick.example', 'a newly chosen one').expect(200);
  });
});

describe('guessing links', () => {
  it('is slowed down', async () => {
    const other = await startPeople();
    const tries = [];
    for (let i = 0; i < 25; i++)
      tries.push((await request(other.app.getHttpServer()).get(`/api/v1/invitations/guess-${i}`)).status);
    expect(tries.filter((status) => status === 404)).toHaveLength(20);
    expect(tries.slice(20)).toEqual(Array(5).fill(429));
    await other.close();
  });
});

describe('the first administrator', () => {
  it('follows a link that the service prints while there is nobody, and may then register sites', async () => {
    const empty = await startPeople({ DEMO: false }, { seed: false });
    const invitations = empty.app.get(InvitationService);
    const old = await invitations.createFirst();
    const link = await invitations.createFirst();
    const post = (url: string | null, body: object) =>
      request(empty.app.getHttpServer())
        .post(`/api/v1/invitations/${url!.split('/').at(-1)}/accept`)
        .send(body);
    const person = { name: 'Ada First', password: 'a long enough one', email: 'First@works.example' };
    await post(old, person).expect(410);
    const { email, ...withoutEmail } = person;
    expect((await post(link, withoutEmail).expect(400)).body.errors[0].path).toBe('email');
    const { body } = await post(link, { ...withoutEmail, email }).expect(200);
    expect(body.user).toMatchObject({ email: 'first@works.example', owner: true, roles: [] });
    expect(await invitations.createFirst()).toBeNull();
    await empty.close();
  });

  it('is also needed when only the demo’s people are left', async () => {
    const former = await startPeople({ DEMO: false });
    expect(await former.app.get(InvitationService).createFirst()).toMatch(
      /^http:\/\/polewright\.test\/invitation\//,
    );
    expect(await former.dataSource.getRepository(User).countBy({ demo: true })).toBe(8);
    await former.close();
  });
});
