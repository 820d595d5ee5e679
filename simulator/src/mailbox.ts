import { simpleParser, type AddressObject } from 'mailparser';
import { SMTPServer } from 'smtp-server';
import type { AddressInfo } from 'node:net';

export interface Message {
  id: string;
  /** ISO 8601, UTC */
  at: string;
  from: string;
  to: string;
  subject: string;
  text: string;
  html: string;
}

const MOST_MESSAGES = 1_000;
const LARGEST_MESSAGE = 5_000_000;

/** Everything that was mailed, newest first, in memory; the oldest goes beyond a thousand. */
export class Mailbox {
  private items: Message[] = [];
  private count = 0;
  /** While on, every SMTP connection is refused with 421. */
  outage = false;

  messages(): readonly Message[] {
    return this.items;
  }

  message(id: string): Message | undefined {
    return this.items.find((item) => item.id === id);
  }

  clear(): void {
    this.items = [];
  }

  /** Keeps a message as it came over the wire. */
  async take(raw: Buffer): Promise<void> {
    const mail = await simpleParser(raw);
    this.items.unshift({
      id: String(++this.count),
      at: new Date().toISOString(),
      from: mail.from?.text ?? '',
      to: addressText(mail.to),
      subject: mail.subject ?? '',
      text: mail.text ?? '',
      html: mail.html || '',
    });
    this.items.length = Math.min(this.items.length, MOST_MESSAGES);
  }
}

function addressText(to: AddressObject | AddressObject[] | undefined): string {
  return [to ?? []]
    .flat()
    .map(({ text }) => text)
    .join(', ');
}

/**
 * An SMTP server (RFC 5321) on the loopback address that delivers everything into a mailbox.
 *
 * @param port 0 takes any free one
 */
export async function serveSmtp(
  port: number,
  mailbox: Mailbox,
): Promise<{ port: number; close: () => Promise<void> }> {
  const smtp = new SMTPServer({
    authOptional: true,
    disabledCommands: ['STARTTLS'],
    size: LARGEST_MESSAGE,
    closeTimeout: 500,
    logger: false,
    onConnect: (_session, done) =>
      done(
        mailbox.outage
          ? Object.assign(new Error('Service not available, try again later'), { responseCode: 421 })
          : null,
      ),
    onAuth: (_auth, _session, done) => done(null, { user: 'anybody' }),
    onData: (stream, _session, done) => {
      const chunks: Buffer[] = [];
      stream.on('data', (chunk: Buffer) => chunks.push(chunk));
      stream.on('end', () => {
        if (stream.sizeExceeded)
          return done(Object.assign(new Error('message too large'), { responseCode: 552 }));
        mailbox.take(Buffer.concat(chunks)).then(
          () => done(),
          (error: Error) => done(error),
        );
      });
    },
  });
  smtp.on('error', () => undefined); // a client that breaks off is its own affair
  await new Promise<void>((listening, failed) => {
    smtp.server.once('error', failed);
    smtp.listen(port, '127.0.0.1', listening);
  });
  return {
    port: (smtp.server.address() as AddressInfo).port,
    close: () => new Promise((closed) => smtp.close(() => closed())),
  };
}
