import { JwtService } from '@nestjs/jwt';
import { register } from 'prom-client';
import request from 'supertest';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { AuthService } from '../../src/auth/auth.service.js';
import { RefreshToken } from '../../src/auth/refresh-token.entity.js';
import { UserRole } from '../../src/people/user-role.entity.js';
import { User } from '../../src/people/user.entity.js';
import { addPerson, startPeople, type PeopleApp } from '../people/people-app.js';

const ADDRESS = 'technician@tarnwick.example';
const PASSWORD = 'polewright-demo';

let people: PeopleApp;
const http = () => request(people.app.getHttpServer());
const signIn = (email = ADDRESS, password = PASSWORD) =>
  http().post('/api/v1/auth/sign-in').send({ email, password });
const refresh = (cookie: string) => http().post('/api/v1/auth/refresh').set('Cookie', cookie);
const me = (token: string) => http().get('/api/v1/auth/me').auth(token, { type: 'bearer' });
const cookieOf = (response: request.Response): string => {
  const cookies = response.headers['set-cookie'] as unknown as string[];
  return cookies[0] ?? '';
};
const counted = async (name: string, label: Record<string, string>): Promise<number> => {
  const metric = await register.getSingleMetric(name)?.get();
  const [key, value] = Object.entries(label)[0]!;
  return metric?.values.find(({ labels }) => (labels as Record<string, unknown>)[key] === value)?.value ?? 0;
};

beforeAll(async () => {
  people = await startPeople();
});
afterAll(() => people.close());

describe('sign-in', () => {
  it('answers an access token, the person with their roles, and a refresh cookie out of reach of scripts', async () => {
    const response = await signIn(' Technician@Tarnwick.Example ').expect(200);
    const [hall, yard] = people.siteIds;
    expect(response.body.user).toEqual({
      id: expect.any(Number),
      name: 'Tomas Birkwell',
      email: ADDRESS,
      owner: false,
      roles: [
        { siteId: hall, role: 'technician' },
        { siteId: yard, role: 'technician' },
      ],
    });
    expect(cookieOf(response)).toMatch(/^polewright_refresh=[\w-]{43};/);
    expect(cookieOf(response)).toMatch(/HttpOnly/);
    expect(cookieOf(response)).toMatch(/SameSite=Strict/);
    expect(cookieOf(response)).toMatch(/Path=\/api\/v1\/auth;/);
    const { body } = await me(response.body.accessToken).expect(200);
    expect(body).toEqual(response.body.user);
  });

  it('keeps no password and no token in the database as it is', async () => {
    const response = await signIn().expect(200);
    const token = /polewright_refresh=([^;]+)/.exec(cookieOf(response))![1]!;
    const { passwordHash } = await people.dataSource.getRepository(User).findOneByOrFail({ email: ADDRESS });
    expect(passwordHash).toMatch(/^\$argon2id\$v=19\$m=19456,t=2,p=1\$/);
    expect(await people.dataSource.getRepository(RefreshToken).existsBy({ tokenHash: token })).toBe(false);
  });

  it('says the same of a wrong password and an unknown address, as problem details', async () => {
    const wrong = await signIn('viewer@tarnwick.example', 'not this one').expect(401);
    const unknown = await signIn('nobody@tarnwick.example', 'not this one').expect(401);
    expect(wrong.body).toEqual(unknown.body);
    expect(wrong.headers['content-type']).toMatch(/application\/problem\+json/);
    expect(wrong.body).toMatchObject({ status: 401, detail: 'Email or password is wrong' });
  });

  it('takes about as long for an unknown address as for a known one', async () => {
    const time = async (email: string) => {
      const times = [];
      for (let i = 0; i < 5; i++) {
        const start = performance.now();
        await signIn(email, 'not this one');
        times.push(performance.now() - start);
      }
      return times.sort((a, b) => a - b)[2]!;
    };
    const known = await time('approver@tarnwick.example');
    const unknown = await time('nobody-else@tarnwick.example');
    // Without the check of nobody's hash the unknown address would answer in a tenth of the time.
    expect(unknown).toBeGreaterThan(known / 3);
  });

  it('refuses a body of the wrong kind by field', async () => {
    const { body } = await http()
      .post('/api/v1/auth/sign-in')
      .send({ email: 5, password: PASSWORD, more: 1 })
      .expect(400);
    expect(body.errors.map(({ path }: { path: string }) => path).sort()).toEqual(['email', 'email', 'more']);
  });

  it('answers a storm on one account with 429 and Retry-After, counts it, and leaves everybody else alone', async () => {
    const before = await counted('polewright_sign_in_total', { result: 'throttled' });
    const storm = await Promise.all(
      Array.from({ length: 40 }, (_, i) => signIn('saskia.thornby@tarnwick.example', `guess ${i}`)),
    );
    const statuses = storm.map(({ status }) => status);
    expect(statuses.filter((status) => status === 401)).toHaveLength(10);
    expect(statuses.filter((status) => status === 429)).toHaveLength(30);
    const refused = storm.find(({ status }) => status === 429)!;
    expect(Number(refused.headers['retry-after'])).toBeGreaterThan(290);
    expect(refused.body.detail).toBe('Too many failed sign-ins for this account. Try again in 5 min.');
    expect(await counted('polewright_sign_in_total', { result: 'throttled' })).toBe(before + 30);
    await signIn('saskia.thornby@tarnwick.example').expect(429);
    await signIn().expect(200);
  });
});

describe('access token', () => {
  it('is asked for on every route that is not public', async () => {
    const { body } = await http().get('/api/v1/auth/me').expect(401);
    expect(body.detail).toBe('Sign in first');
    for (const path of [
      'people',
      'people/invitations',
      'audit',
      'rota?siteId=1',
      'rota/on-call',
      'mail/outbox',
      'mail/demo-inbox',
    ])
      await http().get(`/api/v1/${path}`).expect(401);
  });

  it('is refused when expired, forged, unsigned or of another issuer', async () => {
    const jwt = people.app.get(JwtService, { strict: false });
    const session = await signIn().expect(200);
    const claims = jwt.decode<{ sub: number; sid: string }>(session.body.accessToken);
    const { sub, sid } = claims;
    const before = await counted('polewright_refused_token_total', { reason: 'expired' });
    const expired = await me(jwt.sign({ sub, sid }, { expiresIn: -1 })).expect(401);
    expect(expired.body.detail).toBe('The access token has expired; refresh it');
    expect(await counted('polewright_refused_token_total', { reason: 'expired' })).toBe(before + 1);
    const part = (value: object) => Buffer.from(JSON.stringify(value)).toString('base64url');
    const unsigned = `${part({ alg: 'none', typ: 'JWT' })}.${part({ ...claims })}.`;
    for (const token of [
      jwt.sign({ sub, sid }, { secret: 'another secret' }),
      jwt.sign({ sub, sid }, { issuer: 'somebody else' }),
      jwt.sign({ sub, sid }, { algorithm: 'HS512' }),
      unsigned,
      'not a token',
    ]) {
      expect((await me(token).expect(401)).body.detail).toBe('The access token is not valid');
      await expect(people.app.get(AuthService).userFromAccessToken(token)).rejects.toThrow('is not valid');
    }
    expect(await people.app.get(AuthService).userFromAccessToken(session.body.accessToken)).toMatchObject({
      email: ADDRESS,
    });
  });

  it('ends with the sign-in', async () => {
    const session = await signIn().expect(200);
    await http().post('/api/v1/auth/sign-out').set('Cookie', cookieOf(session)).expect(204);
    expect((await me(session.body.accessToken).expect(401)).body.detail).toMatch(/no longer signed in/);
    await refresh(cookieOf(session)).expect(401);
  });

  it('carries no role: a changed role or a disabled account counts at the next request', async () => {
    const [hall] = people.siteIds;
    const person = await addPerson(people, 'changing', [{ siteId: hall, role: 'viewer' }]);
    const { body } = await signIn(person.email).expect(200);
    await people.dataSource.getRepository(UserRole).update({ userId: person.id }, { role: 'engineer' });
    expect((await me(body.accessToken).expect(200)).body.roles).toEqual([{ siteId: hall, role: 'engineer' }]);
    await people.dataSource.getRepository(User).update(person.id, { disabled: true });
    expect((await me(body.accessToken).expect(401)).body.detail).toMatch(/disabled/);
    expect((await signIn(person.email).expect(401)).body.detail).toMatch(/disabled/);
  });
});

describe('refresh', () => {
  it('gives a new cookie and a new access token for each use', async () => {
    const session = await signIn().expect(200);
    const renewed = await refresh(cookieOf(session)).expect(200);
    expect(cookieOf(renewed)).not.toBe(cookieOf(session));
    expect(renewed.body.user).toEqual(session.body.user);
    await me(renewed.body.accessToken).expect(200);
    await refresh(cookieOf(renewed)).expect(200);
  });

  it('ends the whole sign-in, for thief and owner alike, when a cookie comes a second time', async () => {
    const session = await signIn().expect(200);
    const other = await signIn().expect(200);
    const renewed = await refresh(cookieOf(session)).expect(200);
    await refresh(cookieOf(session)).expect(401);
    await refresh(cookieOf(renewed)).expect(401);
    await me(renewed.body.accessToken).expect(401);
    await me(other.body.accessToken).expect(200);
    const admin = await people.as('admin');
    const { body } = await admin
      .get(`/api/v1/audit?subjectType=person&subjectId=${session.body.user.id}`)
      .expect(200);
    expect(body.items[0]).toMatchObject({
      action: 'session.ended',
      actor: 'Polewright',
      note: 'A refresh token was used twice',
    });
  });

  it('lets one of many at the same time through', async () => {
    const session = await signIn().expect(200);
    const answers = await Promise.all(Array.from({ length: 8 }, () => refresh(cookieOf(session))));
    expect(answers.filter(({ status }) => status === 200)).toHaveLength(1);
  });

  it('refuses without a cookie, with an unknown one and with one that is too old', async () => {
    await http().post('/api/v1/auth/refresh').expect(401);
    await refresh('polewright_refresh=nothing-we-know').expect(401);
    const session = await signIn().expect(200);
    await people.dataSource
      .getRepository(RefreshToken)
      .update({ userId: session.body.user.id }, { expiresAt: new Date(Date.now() - 1) });
    const late = await refresh(cookieOf(session)).expect(401);
    expect(cookieOf(late)).toMatch(/^polewright_refresh=;/);
  });
});

describe('own password', () => {
  it('is changed only against the present one, and ends every other session', async () => {
    const person = await addPerson(people, 'careful', [{ siteId: people.siteIds[0], role: 'viewer' }]);
    const here = request.agent(people.app.getHttpServer());
    const mine = await here.post('/api/v1/auth/sign-in').send({ email: person.email, password: PASSWORD });
    const elsewhere = await signIn(person.email).expect(200);
    const change = (current: string, next: string) =>
      here
        .put('/api/v1/auth/password')
        .auth(mine.body.accessToken, { type: 'bearer' })
        .send({ current, next });
    const wrong = await change('not this one', 'a longer password').expect(400);
    expect(wrong.body.errors).toEqual([{ path: 'current', message: 'This is not your present password' }]);
    expect((await change(PASSWORD, 'short').expect(400)).body.errors[0].path).toBe('next');
    await change(PASSWORD, 'a longer password').expect(204);
    await me(mine.body.accessToken).expect(200);
    await me(elsewhere.body.accessToken).expect(401);
    await refresh(cookieOf(elsewhere)).expect(401);
    await signIn(person.email).expect(401);
    await signIn(person.email, 'a longer password').expect(200);
  });
});

describe('without the demo', () => {
  it('shuts the demo’s people out, whose password everybody knows', async () => {
    const demo = await startPeople({ DEMO: false });
    await request(demo.app.getHttpServer())
      .post('/api/v1/auth/sign-in')
      .send({ email: ADDRESS, password: PASSWORD })
      .expect(401);
    await demo.close();
  });
});
