import { ConfigService } from '@nestjs/config';
import Database from 'better-sqlite3';
import { simpleParser } from 'mailparser';
import { SMTPServer } from 'smtp-server';
import { createServer, type Server } from 'node:http';
import type { AddressInfo } from 'node:net';
import { join } from 'node:path';
import { DataSource } from 'typeorm';
import { afterEach, describe, expect, it, vi } from 'vitest';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { Transactions } from '../../src/database/transactions.js';
import { MailOutboxService, type OutgoingMail } from '../../src/notifications/mail-outbox.service.js';
import { MAX_ATTEMPTS, MailSenderService, retryDelay } from '../../src/notifications/mail-sender.service.js';
import { composeMail, PICTURE_CID } from '../../src/notifications/mail-text.js';
import { Mail } from '../../src/notifications/mail.entity.js';
import { WebPush } from '../../src/notifications/push.js';
import { Sms } from '../../src/notifications/sms.js';
import { Smtp } from '../../src/notifications/smtp.js';
import type { Settings } from '../../src/settings.js';
import { addPerson, startPeople, type PeopleApp } from '../people/people-app.js';

/** What a mail server does with the next mails. */
type Mood = 'takes' | 'busy' | 'refuses the address' | 'hangs up';

const closing: (() => Promise<void>)[] = [];
afterEach(async () => {
  vi.useRealTimers();
  for (const close of closing.splice(0).reverse()) await close();
});

/** A mail server on loopback with a mood. */
async function mailServer(port = 0) {
  const taken: string[] = [];
  const server = {
    taken,
    mood: 'takes' as Mood,
    port,
    onTaken: () => undefined as void,
    hangUp: (): void => smtp.connections.forEach((connection) => connection.close()),
    close: (): Promise<void> => {
      server.hangUp();
      return new Promise((done) => smtp.close(() => done()));
    },
  };
  const smtp = new SMTPServer({
    authOptional: true,
    disabledCommands: ['STARTTLS', 'AUTH'],
    onRcptTo: (_address, _session, done) => {
      if (server.mood === 'takes' || server.mood === 'hangs up') done();
      else
        done(
          Object.assign(new Error(server.mood === 'busy' ? 'Try again later' : 'No such mailbox'), {
            responseCode: server.mood === 'busy' ? 451 : 550,
          }),
        );
    },
    onData: (stream, session, done) => {
      let source = '';
      stream.on('data', (chunk: Buffer) => (source += chunk.toString()));
      stream.on('end', () => {
        if (server.mood === 'hangs up') {
          return void server.hangUp();
        }
        taken.push(source);
        server.onTaken();
        done();
      });
    },
  });
  await new Promise<void>((ready) => smtp.listen(port, '127.0.0.1', ready));
  server.port = (smtp.server.address() as AddressInfo).port;
  closing.push(server.close);
  return server;
}

async function start(port: number, changed = {}, schedule = false): Promise<PeopleApp> {
  const people = await startPeople({ SMTP_URL: `smtp://127.0.0.1:${port}`, ...changed }, { schedule });
  closing.push(() => people.close());
  return people;
}

const mail = (key: string, more: Partial<OutgoingMail> = {}): OutgoingMail => ({
  key,
  to: 'technician@tarnwick.example',
  subject: `About ${key}`,
  ...composeMail({
    greeting: 'Good day,',
    paragraphs: ['the glaze carriage saturates.'],
    link: { label: 'Open', url: 'http://polewright.test/alerts?id=1&x=2' },
  }),
  ...more,
});
const enqueue = (people: PeopleApp, ...mails: OutgoingMail[]) =>
  people.app.get(Transactions).run(async (manager) => {
    for (const one of mails) await people.app.get(MailOutboxService).enqueue(manager, one);
  });
const work = (people: PeopleApp) => people.app.get(MailSenderService).tick();
const row = (people: PeopleApp, key: string) =>
  people.dataSource.getRepository(Mail).findOneByOrFail({ key });
const makeDue = (people: PeopleApp) =>
  people.dataSource
    .getRepository(Mail)
    .update({ state: 'queued' }, { nextAttemptAt: new Date(Date.now() - 1) });

describe('outbox', () => {
  it('sends a mail once, with a stable Message-ID, and marks it', async () => {
    const server = await mailServer();
    const people = await start(server.port);
    await enqueue(people, mail('alert 1'), mail('alert 1', { subject: 'A second time' }));
    await enqueue(people, mail('alert 1', { subject: 'A third time' }));
    await work(people);
    await work(people);
    expect(server.taken).toHaveLength(1);
    expect(server.taken[0]).toMatch(/^From: Polewright <polewright@tarnwick\.example>\r$/m);
    expect(server.taken[0]).toMatch(/^To: technician@tarnwick\.example\r$/m);
    expect(server.taken[0]).toMatch(/^Subject: About alert 1\r$/m);
    expect(server.taken[0]).toMatch(/^Message-ID: <[0-9a-f]{32}@polewright>\r$/m);
    expect(await row(people, 'alert 1')).toMatchObject({ state: 'sent', attempts: 1, error: null });
  });

  it('killed between sending and marking: one copy more, with the same Message-ID, that says so', async () => {
    const server = await mailServer();
    const people = await start(server.port);
    // As the file is at the moment at which the server has taken the mail.
    const left = join(people.settings.DATA_DIR, 'left.sqlite');
    server.onTaken = () => void new Database(people.settings.DATABASE).exec(`VACUUM INTO '${left}'`).close();
    await enqueue(people, mail('alert 1'));
    await work(people);
    server.onTaken = () => undefined;
    const dataSource = await new DataSource(dataSourceOptions(left)).initialize();
    const mails = dataSource.getRepository(Mail);
    expect(await mails.findOneByOrFail({})).toMatchObject({ state: 'queued', startedAt: expect.any(Date) });
    const config = people.app.get(ConfigService);
    const sender = new MailSenderService(
      mails,
      new Transactions(dataSource),
      people.app.get(Smtp),
      people.app.get(WebPush),
      people.app.get(Sms),
      config as ConfigService<Settings, true>,
    );
    await sender.tick();
    await sender.tick();
    expect(server.taken).toHaveLength(2);
    const [first, second] = server.taken as [string, string];
    const idOf = (source: string) => /^Message-ID: (\S+)/m.exec(source)?.[1];
    expect(idOf(second)).toBe(idOf(first));
    expect(second).toMatch(/^Subject: \(perhaps again\) About alert 1\r$/m);
    expect(second).toContain('You may have had this mail before');
    expect(first).not.toContain('You may have had this mail before');
    expect(await mails.findOneByOrFail({})).toMatchObject({ state: 'sent', perhapsAgain: true });
    await dataSource.destroy();
  });

  it('that broke off after everything was handed over is tried again as a possible copy', async () => {
    const server = await mailServer();
    const people = await start(server.port);
    server.mood = 'hangs up';
    await enqueue(people, mail('cut'), mail('and another'));
    await work(people);
    expect(await row(people, 'cut')).toMatchObject({ state: 'queued', perhapsAgain: true });
    server.mood = 'takes';
    await makeDue(people);
    await work(people);
    expect(server.taken.at(-1)).toContain('(perhaps again)');
  });

  it('with the mail server down for an hour, then back: every mail once', async () => {
    const { port, close } = await mailServer();
    await close();
    const people = await start(port);
    vi.useFakeTimers({ toFake: ['Date'], now: new Date('2026-12-01T02:00:00Z') });
    let server: Awaited<ReturnType<typeof mailServer>> | null = null;
    for (let second = 0; second <= 5_400; second += 20) {
      vi.setSystemTime(Date.UTC(2026, 11, 1, 2) + second * 1_000);
      if (second % 300 === 0 && second < 3_600) await enqueue(people, mail(`at ${second}`));
      if (second === 3_600) server = await mailServer(port);
      await work(people);
      if (second === 3_580)
        expect(await people.dataSource.getRepository(Mail).countBy({ state: 'queued' })).toBe(12);
    }
    vi.useRealTimers();
    const subjects = server!.taken.map((source) => /^Subject: (.*)\r$/m.exec(source)?.[1]);
    expect(subjects.sort()).toEqual(Array.from({ length: 12 }, (_, i) => `About at ${i * 300}`).sort());
    expect(await people.dataSource.getRepository(Mail).countBy({ state: 'sent' })).toBe(12);
  });

  it('shows its picture in the mail as PNG, with the same in words', async () => {
    const server = await mailServer();
    const people = await start(server.port);
    const svg =
      '<svg xmlns="http://www.w3.org/2000/svg" width="60" height="40"><rect width="60" height="40"/></svg>';
    await enqueue(people, mail('drawn', { picture: { svg, text: 'A black field' } }));
    await work(people);
    const { html, text, attachments } = await simpleParser(server.taken[0]!, { skipImageLinks: true });
    expect(html).toContain(`<img src="cid:${PICTURE_CID}" alt="A black field"`);
    expect(text).toContain('A black field');
    const [png] = attachments;
    expect(png!.cid).toBe(PICTURE_CID);
    // PNG (ISO/IEC 15948): signature, then the header chunk with width and height at bytes 16 and 20.
    expect(png!.content.subarray(1, 4).toString()).toBe('PNG');
    expect([png!.content.readUInt32BE(16), png!.content.readUInt32BE(20)]).toEqual([120, 80]);
  });

  it('is worked by itself every second', async () => {
    const server = await mailServer();
    const people = await start(server.port, {}, true);
    await enqueue(people, mail('by itself'));
    await vi.waitFor(() => expect(server.taken).toHaveLength(1), { timeout: 5_000 });
    await vi.waitFor(async () => expect((await row(people, 'by itself')).state).toBe('sent'));
  });

  it('goes with the unit of work that it tells of', async () => {
    const people = await start(1);
    await expect(
      people.app.get(Transactions).run(async (manager) => {
        await people.app.get(MailOutboxService).enqueue(manager, mail('lost'));
        throw new Error('and then it failed');
      }),
    ).rejects.toThrow();
    expect(await people.dataSource.getRepository(Mail).count()).toBe(0);
  });

  it('tries again, later each time, until the server takes it', async () => {
    const server = await mailServer();
    const people = await start(server.port);
    server.mood = 'busy';
    await enqueue(people, ...Array.from({ length: 45 }, (_, i) => mail(`busy ${i}`)));
    const before = Date.now();
    await work(people);
    const first = await row(people, 'busy 44');
    expect(first).toMatchObject({
      state: 'queued',
      attempts: 1,
      error: expect.stringMatching(/Try again later/),
    });
    expect(first.nextAttemptAt.getTime()).toBeGreaterThanOrEqual(before + 5_000);
    await work(people);
    expect((await row(people, 'busy 44')).attempts).toBe(1);
    await makeDue(people);
    await work(people);
    const second = await row(people, 'busy 44');
    expect(second.attempts).toBe(2);
    expect(second.nextAttemptAt.getTime()).toBeGreaterThanOrEqual(before + 10_000);
    server.mood = 'takes';
    await makeDue(people);
    await work(people);
    expect(server.taken).toHaveLength(45);
    expect(await people.dataSource.getRepository(Mail).countBy({ state: 'sent' })).toBe(45);
  });

  it('waits 5 s, doubling up to 10 min', () => {
    expect([1, 2, 3, 7, 8, 20].map(retryDelay)).toEqual([5, 10, 20, 320, 600, 600]);
  });

  it('is given up after the last attempt, and at once where the server knows no such mailbox', async () => {
    const people = await start(1);
    await enqueue(people, mail('hopeless'));
    await people.dataSource.getRepository(Mail).update({ key: 'hopeless' }, { attempts: MAX_ATTEMPTS - 1 });
    await work(people);
    expect(await row(people, 'hopeless')).toMatchObject({
      state: 'failed',
      attempts: MAX_ATTEMPTS,
      error: expect.stringMatching(/ECONNREFUSED/),
    });
    const server = await mailServer();
    server.mood = 'refuses the address';
    const other = await start(server.port);
    await enqueue(other, mail('unknown mailbox'));
    await work(other);
    expect(await row(other, 'unknown mailbox')).toMatchObject({ state: 'failed', attempts: 1 });
  });

  it('is listed to administrators and can be sent again by them, never twice', async () => {
    const server = await mailServer();
    server.mood = 'refuses the address';
    const people = await start(server.port);
    const [hall, yard] = people.siteIds;
    await addPerson(people, 'yardadmin', [{ siteId: yard, role: 'administrator' }]);
    await enqueue(
      people,
      mail('of the hall', { to: 'guest@elsewhere.example', siteId: hall, alertId: 12 }),
      mail('to a technician'),
    );
    await work(people);
    const admin = await people.as('admin');
    const { body } = await admin.get('/api/v1/mail/outbox?state=failed').expect(200);
    expect(body.nextCursor).toBeNull();
    const listed = body.items.find(({ alertId }: { alertId: number }) => alertId === 12);
    expect(body.items).toHaveLength(2);
    expect(listed).toEqual({
      id: expect.any(Number),
      to: 'guest@elsewhere.example',
      subject: 'About of the hall',
      state: 'failed',
      attempts: 1,
      createdAt: expect.stringMatching(/Z$/),
      sentAt: null,
      error: expect.stringMatching(/No such mailbox/),
      alertId: 12,
      channel: 'mail',
      perhapsAgain: false,
      groupId: null,
    });
    const yardAdmin = await people.as('yardadmin');
    const ofYard = await yardAdmin.get('/api/v1/mail/outbox').expect(200);
    expect(ofYard.body.items.map(({ to }: { to: string }) => to)).toEqual(['technician@tarnwick.example']);
    await yardAdmin.post(`/api/v1/mail/outbox/${listed.id}/resend`).expect(404);
    for (const who of ['viewer', 'technician', 'engineer', 'approver']) {
      const agent = await people.as(who);
      await agent.get('/api/v1/mail/outbox').expect(403);
      await agent.post(`/api/v1/mail/outbox/${listed.id}/resend`).expect(403);
    }
    server.mood = 'takes';
    const again = await admin.post(`/api/v1/mail/outbox/${listed.id}/resend`).expect(200);
    expect(again.body).toMatchObject({ state: 'queued', attempts: 0 });
    await work(people);
    expect(server.taken).toHaveLength(1);
    await admin.post(`/api/v1/mail/outbox/${listed.id}/resend`).expect(409);
    const page = await admin.get('/api/v1/mail/outbox?limit=1').expect(200);
    expect(page.body.nextCursor).toBe(String(page.body.items[0].id));
    await admin.get('/api/v1/mail/outbox?state=lost').expect(400);
  });
});

describe('a flood', () => {
  const alertMail = (i: number, to = 'technician@tarnwick.example') =>
    mail(`alert ${i} to ${to}`, { alertId: i, to, siteId: 1 });

  it('of 10,000 alerts in a minute comes in a few mails: the first ones alone, then one for all every five minutes', async () => {
    const server = await mailServer();
    const people = await start(server.port);
    const begin = Date.UTC(2026, 11, 1, 2);
    vi.useFakeTimers({ toFake: ['Date'], now: begin });
    for (let second = 0; second < 60; second++) {
      vi.setSystemTime(begin + second * 1_000);
      const from = Math.round((second * 10_000) / 60);
      const to = Math.round(((second + 1) * 10_000) / 60);
      await enqueue(people, ...Array.from({ length: to - from }, (_, i) => alertMail(from + i + 1)));
      if (second === 20) await enqueue(people, alertMail(1, 'engineer@tarnwick.example'));
      await work(people);
    }
    for (let minute = 1; minute <= 12; minute++) {
      vi.setSystemTime(begin + minute * 60_000);
      await work(people);
    }
    vi.useRealTimers();
    const subjects = server.taken.map((source) => /^Subject: (.*)\r$/m.exec(source)![1]!);
    const floods = subjects.filter((subject) => subject.startsWith('Flood of alerts'));
    expect(floods).toEqual(['Flood of alerts: 167 wait', 'Flood of alerts: 9833 wait']);
    // Who is in no flood is told as ever.
    expect(subjects.filter((subject) => !subject.startsWith('Flood'))).toEqual([
      'About alert 1 to engineer@tarnwick.example',
    ]);
    const mails = people.dataSource.getRepository(Mail);
    expect(await mails.countBy({ state: 'grouped', to: 'technician@tarnwick.example' })).toBe(10_000);
    expect(await mails.countBy({ state: 'queued' })).toBe(0);
    const last = await simpleParser(server.taken.at(-1)!);
    expect(last.text).toContain('http://polewright.test/alerts/168');
    expect(last.text).toContain('… and 9793 more.');
  });

  it('is none with ten alerts, or with mails that tell of something else', async () => {
    const server = await mailServer();
    const people = await start(server.port);
    await enqueue(people, ...Array.from({ length: 10 }, (_, i) => alertMail(i + 1)));
    await enqueue(people, ...Array.from({ length: 5 }, (_, i) => mail(`other ${i}`)));
    await work(people);
    expect(server.taken).toHaveLength(15);
    await enqueue(people, alertMail(11), alertMail(12));
    await work(people);
    expect(server.taken).toHaveLength(16);
    expect(server.taken.at(-1)).toMatch(/^Subject: Flood of alerts: 2 wait\r$/m);
  });
});

describe('mail text', () => {
  it('is the same in text and HTML, and nothing in it becomes markup', () => {
    const { text, html } = composeMail({
      greeting: 'Good day <b>Nell</b>,',
      paragraphs: ['5 < 6 & "so on"'],
      link: { label: 'Open', url: 'http://polewright.test/?a=1&b="2"' },
      closing: 'Small print',
    });
    expect(text).toBe(
      'Good day <b>Nell</b>,\n\n5 < 6 & "so on"\n\nOpen: http://polewright.test/?a=1&b="2"\n\nSmall print\n',
    );
    expect(html).toContain('<p>Good day &lt;b&gt;Nell&lt;/b&gt;,</p>');
    expect(html).toContain('<p>5 &lt; 6 &amp; &quot;so on&quot;</p>');
    expect(html).toContain('<a href="http://polewright.test/?a=1&amp;b=&quot;2&quot;">Open</a>');
    expect(html).toContain('Small print');
  });
});

describe('demo inbox', () => {
  const inbox = async (answer: (server: Server) => void) => {
    const server = createServer((request, response) => {
      if (request.url === '/messages')
        response.end(JSON.stringify({ items: [{ id: '1', subject: 'Hello' }] }));
      else response.writeHead(404).end();
    });
    await new Promise<void>((ready) => server.listen(0, '127.0.0.1', ready));
    answer(server);
    return `http://127.0.0.1:${(server.address() as AddressInfo).port}`;
  };

  it('shows what the local mail server took to anybody signed in, and says when it does not answer', async () => {
    let server!: Server;
    const url = await inbox((one) => (server = one));
    const people = await start(1, { MAIL_INBOX_URL: url });
    const viewer = await people.as('viewer');
    const { body } = await viewer.get('/api/v1/mail/demo-inbox').expect(200);
    expect(body).toEqual({ items: [{ id: '1', subject: 'Hello' }] });
    await new Promise((done) => server.close(done).closeAllConnections());
    const down = await viewer.get('/api/v1/mail/demo-inbox').expect(502);
    expect(down.body.detail).toMatch(/mail server does not answer/);
  });

  it('is not there without the demo’s mail server', async () => {
    const people = await start(1);
    await (await people.as('viewer')).get('/api/v1/mail/demo-inbox').expect(404);
  });
});
