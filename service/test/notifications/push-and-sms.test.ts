import { createECDH, createPublicKey, randomBytes, verify } from 'node:crypto';
import { createServer, type IncomingHttpHeaders } from 'node:http';
import { createRequire } from 'node:module';
import type { AddressInfo } from 'node:net';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { Transactions } from '../../src/database/transactions.js';
import { MailSenderService } from '../../src/notifications/mail-sender.service.js';
import { Mail } from '../../src/notifications/mail.entity.js';
import { PushSubscription } from '../../src/notifications/push-subscription.entity.js';
import { QuickNoticesService } from '../../src/notifications/quick-notices.service.js';
import { User } from '../../src/people/user.entity.js';
import { startPeople, type PeopleApp } from '../people/people-app.js';

// The decoder of RFC 8188 that web-push itself encrypts with.
const require = createRequire(createRequire(import.meta.url).resolve('web-push'));
const ece = require('http_ece') as {
  decrypt: (body: Buffer, keys: { version: string; privateKey: unknown; authSecret: string }) => Buffer;
};

interface Taken {
  path: string;
  headers: IncomingHttpHeaders;
  body: Buffer;
}

let people: PeopleApp;
let tomas: User;
const taken: Taken[] = [];
let status = 201;
let answer = '';
/** Stands for a push service, and for the SMS interface. */
const server = createServer((request, response) => {
  const chunks: Buffer[] = [];
  request.on('data', (chunk: Buffer) => chunks.push(chunk));
  request.on('end', () => {
    taken.push({ path: request.url!, headers: request.headers, body: Buffer.concat(chunks) });
    response.writeHead(status, { 'content-type': 'application/json' }).end(answer);
  });
});

/** A browser's keys. */
const browser = createECDH('prime256v1');
const p256dh = browser.generateKeys('base64url');
const auth = randomBytes(16).toString('base64url');
let endpoint: string;

beforeAll(async () => {
  await new Promise<void>((ready) => server.listen(0, '127.0.0.1', ready));
  const origin = `http://127.0.0.1:${(server.address() as AddressInfo).port}`;
  endpoint = `${origin}/push/abc`;
  people = await startPeople({
    SMS: { accountSid: `AC${'0'.repeat(32)}`, authToken: 'secret', from: '+441632960000', apiUrl: origin },
  });
  tomas = await people.dataSource
    .getRepository(User)
    .findOneByOrFail({ email: 'technician@tarnwick.example' });
});
afterAll(async () => {
  await people.close();
  await new Promise((done) => server.close(done));
});
beforeEach(async () => {
  taken.length = 0;
  status = 201;
  answer = '';
  for (const table of ['mail_outbox', 'push_subscription'])
    await people.dataSource.query(`DELETE FROM "${table}"`);
  await people.dataSource.getRepository(User).update(tomas.id, { phone: null, smsAlerts: false });
});

const subscribed = () =>
  people.dataSource
    .getRepository(PushSubscription)
    .save({ userId: tomas.id, endpoint, p256dh, auth, browser: 'Test browser' });
const tell = (key = 'alert 7', now = new Date()): Promise<string[]> =>
  people.app.get(Transactions).run((manager) =>
    people.app.get(QuickNoticesService).tell(
      manager,
      {
        key,
        userId: tomas.id,
        title: 'CU-03 feed: output at its limit',
        body: 'Saturated. Do: look at the load.',
        alertId: 7,
        siteId: people.siteIds[0],
      },
      now,
    ),
  );
const work = () => people.app.get(MailSenderService).tick();
const outbox = () => people.dataSource.getRepository(Mail).find({ order: { id: 'ASC' } });

describe('push messages', () => {
  it('reach the browser encrypted for it and signed by this installation', async () => {
    await subscribed();
    expect(await tell()).toEqual(['push']);
    await work();
    const [message] = taken;
    expect(message!.path).toBe('/push/abc');
    expect(message!.headers).toMatchObject({ 'content-encoding': 'aes128gcm', urgency: 'high', ttl: '3600' });
    expect(message!.body.toString()).not.toContain('CU-03');
    const clear = ece.decrypt(message!.body, { version: 'aes128gcm', privateKey: browser, authSecret: auth });
    expect(JSON.parse(clear.toString())).toEqual({
      title: 'CU-03 feed: output at its limit',
      body: 'Saturated. Do: look at the load.',
      url: '/alerts/7',
      tag: expect.stringMatching(/^alert 7 push /),
    });
    // RFC 8292: an ES256 token for the endpoint's origin, checked with the key that browsers are given.
    const { pushKey } = (await (await people.as('technician')).get('/api/v1/notification-choices')).body;
    const [, token, key] = /^vapid t=(\S+), k=(\S+)$/.exec(message!.headers.authorization!)!;
    expect(key).toBe(pushKey);
    const [head, claims, signature] = token!.split('.') as [string, string, string];
    expect(JSON.parse(Buffer.from(claims, 'base64url').toString())).toMatchObject({
      aud: new URL(endpoint).origin,
      sub: 'mailto:polewright@tarnwick.example',
    });
    const point = Buffer.from(key!, 'base64url');
    const publicKey = createPublicKey({
      key: {
        kty: 'EC',
        crv: 'P-256',
        x: point.subarray(1, 33).toString('base64url'),
        y: point.subarray(33).toString('base64url'),
      },
      format: 'jwk',
    });
    expect(
      verify(
        'sha256',
        Buffer.from(`${head}.${claims}`),
        { key: publicKey, dsaEncoding: 'ieee-p1363' },
        Buffer.from(signature, 'base64url'),
      ),
    ).toBe(true);
    expect(await outbox()).toMatchObject([{ channel: 'push', state: 'sent' }]);
  });

  it('are tried again when the push service is busy, and end when the browser has ended them', async () => {
    await subscribed();
    await tell();
    status = 503;
    await work();
    expect(await outbox()).toMatchObject([{ state: 'queued', error: 'The push service answered 503' }]);
    status = 410;
    await people.dataSource.query(`UPDATE "mail_outbox" SET "nextAttemptAt" = "createdAt"`);
    await work();
    expect(await outbox()).toMatchObject([
      { state: 'failed', error: 'The browser no longer takes messages' },
    ]);
    expect(await people.dataSource.getRepository(PushSubscription).count()).toBe(0);
    expect(await tell('alert 8')).toEqual([]);
  });

  it('in a flood say so once and then stop', async () => {
    await subscribed();
    for (let i = 0; i < 14; i++) await tell(`alert ${i}`);
    const subjects = (await outbox()).map(({ subject }) => subject);
    expect(subjects).toHaveLength(11);
    expect(subjects.at(-1)).toBe('Flood of alerts');
  });

  it('are switched on and off by the person for their own browsers, at https addresses only', async () => {
    const technician = await people.as('technician');
    const path = '/api/v1/notification-choices/browsers';
    const body = { endpoint: 'https://push.example/abc', keys: { p256dh, auth }, browser: 'Firefox' };
    const { body: choices } = await technician.post(path).send(body).expect(200);
    expect(choices.subscriptions).toMatchObject([{ endpoint: body.endpoint, browser: 'Firefox' }]);
    // The same browser under another person is that person's.
    const engineer = await people.as('engineer');
    const { body: taking } = await engineer.post(path).send(body).expect(200);
    expect((await technician.get('/api/v1/notification-choices')).body.subscriptions).toEqual([]);
    await technician.delete(`${path}/${taking.subscriptions[0].id}`).expect(404);
    await engineer.delete(`${path}/${taking.subscriptions[0].id}`).expect(204);
    for (const bad of ['http://push.example/abc', 'https://127.0.0.1/abc', 'https://localhost/abc', 'push'])
      await technician
        .post(path)
        .send({ ...body, endpoint: bad })
        .expect(400);
    await technician
      .post(path)
      .send({ ...body, keys: { p256dh: 'no key!', auth } })
      .expect(400);
  });
});

describe('SMS', () => {
  const choose = async (choices: object) =>
    (await people.as('technician')).put('/api/v1/notification-choices').send(choices);

  it('goes to who chose it, by the interface’s own form', async () => {
    expect((await choose({ dailyDigest: true, phone: null, smsAlerts: true })).status).toBe(400);
    expect((await choose({ dailyDigest: true, phone: '0163296', smsAlerts: true })).status).toBe(400);
    expect(await tell()).toEqual([]);
    const { body } = await choose({ dailyDigest: true, phone: '+441632960123', smsAlerts: true });
    expect(body).toMatchObject({ phone: '+441632960123', smsAlerts: true, smsOffered: true });
    expect(await tell()).toEqual(['SMS']);
    answer = JSON.stringify({ sid: 'SM1', status: 'queued' });
    await work();
    expect(taken[0]!.path).toBe(`/2010-04-01/Accounts/AC${'0'.repeat(32)}/Messages.json`);
    expect(Object.fromEntries(new URLSearchParams(taken[0]!.body.toString()))).toEqual({
      To: '+441632960123',
      From: '+441632960000',
      Body: 'CU-03 feed: output at its limit. Saturated. Do: look at the load.',
    });
    expect(await outbox()).toMatchObject([{ channel: 'sms', state: 'sent' }]);
  });

  it('that is refused is given up, and one that got no answer is tried again', async () => {
    await choose({ dailyDigest: true, phone: '+441632960123', smsAlerts: true });
    await tell();
    status = 500;
    answer = JSON.stringify({ message: 'Busy' });
    await work();
    expect(await outbox()).toMatchObject([{ state: 'queued', attempts: 1 }]);
    status = 400;
    answer = JSON.stringify({ code: 21_211, message: 'That is no phone number', status: 400 });
    await people.dataSource.query(`UPDATE "mail_outbox" SET "nextAttemptAt" = "createdAt"`);
    await work();
    expect(await outbox()).toMatchObject([{ state: 'failed', error: 'That is no phone number' }]);
  });
});
