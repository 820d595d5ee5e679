import { createTransport } from 'nodemailer';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { inboxAnswers } from './inbox-server.js';
import { serveLoopback } from './loopback-server.js';
import { Mailbox, serveSmtp, type Message } from './mailbox.js';

const mailbox = new Mailbox();
let base: string;
let smtpPort: number;
const closing: (() => Promise<void>)[] = [];

beforeAll(async () => {
  const smtp = await serveSmtp(0, mailbox);
  const inbox = await serveLoopback(0, inboxAnswers(mailbox));
  smtpPort = smtp.port;
  base = `http://127.0.0.1:${inbox.port}`;
  closing.push(smtp.close, inbox.close);
});
afterAll(async () => {
  for (const close of closing) await close();
});
beforeEach(() => mailbox.clear());

async function mail(subject: string, html?: string): Promise<void> {
  const transport = createTransport({ host: '127.0.0.1', port: smtpPort });
  await transport.sendMail({
    from: 'Polewright <polewright@tarnwick.example>',
    to: ['technician@tarnwick.example', 'Ines Harrowgate <engineer@tarnwick.example>'],
    subject,
    text: 'Output at its limit 12 % of moving time – CU-03 feed.\n',
    ...(html && { html }),
  });
}
const items = async (): Promise<Message[]> =>
  ((await (await fetch(`${base}/messages`)).json()) as { items: Message[] }).items;
const outage = (on: unknown): Promise<Response> =>
  fetch(`${base}/outage`, { method: 'POST', body: JSON.stringify({ on }) });

describe('the demo’s mail server', () => {
  it('keeps what is mailed, newest first', async () => {
    await mail('First');
    await mail('Zweite – ä', '<p>Look at <a href="http://localhost/axes/4">CU-03 feed</a></p>');
    const [second, first] = await items();
    expect(second).toMatchObject({
      from: expect.stringContaining('polewright@tarnwick.example'),
      subject: 'Zweite – ä',
      html: expect.stringContaining('<a href="http://localhost/axes/4">'),
    });
    expect(second!.to).toContain('technician@tarnwick.example');
    expect(second!.to).toContain('engineer@tarnwick.example');
    expect(first).toMatchObject({ subject: 'First', html: '' });
    expect(first!.text).toBe('Output at its limit 12 % of moving time – CU-03 feed.\n');
    expect(Math.abs(Date.parse(first!.at) - Date.now())).toBeLessThan(10_000);
    expect(await (await fetch(`${base}/messages/${first!.id}`)).json()).toEqual(first);
  });

  it('forgets on request', async () => {
    await mail('Gone');
    expect((await fetch(`${base}/messages`, { method: 'DELETE' })).status).toBe(200);
    expect(await items()).toEqual([]);
    expect((await fetch(`${base}/messages/1`)).status).toBe(404);
  });

  it('refuses with 421 during an outage and takes mail again afterwards', async () => {
    expect((await outage(true)).status).toBe(200);
    await expect(mail('Lost')).rejects.toMatchObject({ responseCode: 421 });
    expect(await items()).toEqual([]);
    await outage(false);
    await mail('Found');
    expect(await items()).toHaveLength(1);
    expect((await outage('yes')).status).toBe(400);
  });

  it('keeps a thousand messages', async () => {
    const raw = Buffer.from('From: a@tarnwick.example\r\nTo: b@tarnwick.example\r\nSubject: x\r\n\r\nx\r\n');
    for (let i = 0; i < 1010; i++) await mailbox.take(raw);
    const kept = await items();
    expect(kept).toHaveLength(1000);
    expect(Number(kept[0]!.id) - Number(kept[999]!.id)).toBe(999);
  });
});

describe('the inbox page', () => {
  const read = async (path: string): Promise<string> => (await fetch(`${base}${path}`)).text();

  it('lists mail without letting its text become markup', async () => {
    expect(await read('/')).toContain('No mail yet');
    await mail('<script>alert(1)</script>');
    const page = await read('/');
    expect(page).toContain('&lt;script&gt;alert(1)&lt;/script&gt;');
    expect(page).not.toContain('<script');
  });

  it('shows a message’s HTML only inside a sandbox, its text otherwise', async () => {
    await mail('With HTML', '<b onclick="x()">bold</b><script>steal()</script>');
    await mail('Plain');
    const [plain, html] = await items();
    const shown = await read(`/?id=${html!.id}`);
    expect(shown).toMatch(/<iframe[^>]* sandbox="allow-popups allow-popups-to-escape-sandbox"/);
    expect(shown).not.toContain('<script');
    expect(shown).not.toContain('<b onclick');
    expect(await read(`/?id=${plain!.id}`)).toContain('<pre>Output at its limit');
    expect((await fetch(`${base}/?id=none`)).status).toBe(404);
  });
});
