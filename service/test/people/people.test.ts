import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { mayRegisterSites } from '../../src/auth/signed-in-user.js';
import { addPerson, startPeople, type PeopleApp } from './people-app.js';

let people: PeopleApp;
let hall: number;
let yard: number;

beforeAll(async () => {
  people = await startPeople();
  [hall, yard] = people.siteIds;
});
afterAll(() => people.close());

describe('people', () => {
  it('are listed to administrators with their roles on the administrator’s sites only', async () => {
    await addPerson(people, 'halladmin', [{ siteId: hall, role: 'administrator' }]);
    await addPerson(people, 'yardonly', [{ siteId: yard, role: 'viewer' }]);
    const all = (await (await people.as('admin')).get('/api/v1/people').expect(200)).body.items;
    const ofHall = (await (await people.as('halladmin')).get('/api/v1/people').expect(200)).body.items;
    const emails = (items: { email: string }[]) => items.map(({ email }) => email);
    expect(emails(all)).toContain('yardonly@tarnwick.example');
    expect(emails(ofHall)).not.toContain('yardonly@tarnwick.example');
    const viewer = (items: { email: string }[]) => items.find(({ email }) => email.startsWith('viewer@'));
    expect(viewer(all)).toEqual({
      id: expect.any(Number),
      name: 'Orla Fennick',
      email: 'viewer@tarnwick.example',
      roles: [
        { siteId: yard, siteName: 'Kiln Yard', role: 'viewer' },
        { siteId: hall, siteName: 'Tile Hall', role: 'viewer' },
      ],
      disabled: false,
      lastSignInAt: null,
      invited: false,
    });
    expect(viewer(ofHall)).toMatchObject({ roles: [{ siteId: hall, role: 'viewer' }] });
    expect(JSON.stringify(all)).not.toContain('argon2');
  });

  it('get other roles on the administrator’s sites; roles elsewhere stay', async () => {
    const person = await addPerson(people, 'both', [
      { siteId: hall, role: 'viewer' },
      { siteId: yard, role: 'engineer' },
    ]);
    const admin = await people.as('halladmin');
    const change = (body: object) => admin.patch(`/api/v1/people/${person.id}`).send(body);
    const { body } = await change({ roles: [{ siteId: hall, role: 'approver' }] }).expect(200);
    expect(body.roles).toEqual([{ siteId: hall, siteName: 'Tile Hall', role: 'approver' }]);
    await change({ roles: [{ siteId: yard, role: 'approver' }] }).expect(403);
    expect((await change({ disabled: true }).expect(403)).body.detail).toMatch(/also works on other sites/);
    const me = await (await people.as('both')).get('/api/v1/auth/me').expect(200);
    expect(me.body.roles).toEqual([
      { siteId: hall, role: 'approver' },
      { siteId: yard, role: 'engineer' },
    ]);
    expect((await change({ roles: [] }).expect(200)).body.roles).toEqual([]);
    await change({ roles: [{ siteId: hall, role: 'viewer' }] }).expect(404);
    const audit = await admin.get(`/api/v1/audit?subjectType=person&subjectId=${person.id}`).expect(200);
    expect(audit.body.items).toMatchObject([
      { action: 'person.changed', before: { role: 'approver' }, after: { role: null } },
      { action: 'person.changed', before: { role: 'viewer' }, after: { role: 'approver' } },
    ]);
  });

  it('are disabled and enabled again', async () => {
    const person = await addPerson(people, 'leaving', [{ siteId: hall, role: 'technician' }]);
    const theirs = await people.as('leaving');
    const admin = await people.as('admin');
    const disable = (disabled: boolean) =>
      admin.patch(`/api/v1/people/${person.id}`).send({ disabled }).expect(200);
    expect((await disable(true)).body.disabled).toBe(true);
    await theirs.get('/api/v1/auth/me').expect(401);
    await theirs.post('/api/v1/auth/refresh').expect(401);
    await disable(false);
    await people.as('leaving');
  });

  it('cannot shut themselves out or leave a site without an administrator', async () => {
    const lone = await addPerson(people, 'lone', [{ siteId: hall, role: 'administrator' }]);
    const admin = await people.as('lone');
    await admin.patch(`/api/v1/people/${lone.id}`).send({ disabled: true }).expect(409);
    const all = (await admin.get('/api/v1/people')).body.items as { id: number; roles: { role: string }[] }[];
    const others = all.filter(({ id, roles }) => id !== lone.id && roles[0]?.role === 'administrator');
    for (const { id } of others)
      await admin
        .patch(`/api/v1/people/${id}`)
        .send({ roles: [{ siteId: hall, role: 'viewer' }] })
        .expect(200);
    const last = await admin
      .patch(`/api/v1/people/${lone.id}`)
      .send({ roles: [{ siteId: hall, role: 'viewer' }] });
    expect(last.status).toBe(409);
    expect((await admin.get('/api/v1/auth/me')).body.roles).toEqual([
      { siteId: hall, role: 'administrator' },
    ]);
  });

  it('are changed by administrators only', async () => {
    const person = await addPerson(people, 'target', [{ siteId: hall, role: 'viewer' }]);
    for (const who of ['viewer', 'technician', 'engineer', 'approver'])
      await (
        await people.as(who)
      )
        .patch(`/api/v1/people/${person.id}`)
        .send({ roles: [{ siteId: hall, role: 'approver' }] })
        .expect(403);
  });
});

describe('who may register sites', () => {
  const user = { id: 1, name: 'a', email: 'a@b.example', owner: false, roles: [] };
  it('is an administrator of any site, or the owner', () => {
    expect(mayRegisterSites(user)).toBe(false);
    expect(mayRegisterSites({ ...user, owner: true })).toBe(true);
    expect(mayRegisterSites({ ...user, roles: [{ siteId: 1, role: 'approver' }] })).toBe(false);
    expect(mayRegisterSites({ ...user, roles: [{ siteId: 1, role: 'administrator' }] })).toBe(true);
  });
});
