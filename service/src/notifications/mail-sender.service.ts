import { Injectable, Logger, type OnApplicationShutdown } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectRepository } from '@nestjs/typeorm';
import { createTransport } from 'nodemailer';
import { createHash } from 'node:crypto';
import { Counter } from 'prom-client';
import { LessThanOrEqual, Repository } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import type { Settings } from '../settings.js';
import { Mail } from './mail.entity.js';

/** Mails that are sent at once, over as many connections at most as `CONNECTIONS`. */
const BATCH = 20;
const CONNECTIONS = 3;
/** ms; a mail server that hangs must not hold the outbox for long */
const TIMEOUT = 10_000;
export const MAX_ATTEMPTS = 20;
/** s */
const FIRST_DELAY = 5;
const LONGEST_DELAY = 600;

const sent = new Counter({
  name: 'polewright_mail_total',
  help: 'Attempts to send a mail by result',
  labelNames: ['result'] as const,
});

/** Seconds to wait after the n-th attempt has failed: 5, 10, 20 … up to 10 minutes. */
export const retryDelay = (attempts: number): number =>
  Math.min(FIRST_DELAY * 2 ** (attempts - 1), LONGEST_DELAY);

/** A mail server's last word about this one mail (RFC 5321, 4.2.1: 5yz), where a further attempt cannot help. */
const isFinal = (error: unknown): boolean => {
  const { code, responseCode } = error as { code?: string; responseCode?: number };
  return (code === 'EENVELOPE' || code === 'EMESSAGE') && responseCode !== undefined && responseCode >= 500;
};

/**
 * Carries the outbox to the mail server. A mail is marked after the server took it, so that a crash between the two
 * sends it again rather than never: its Message-ID stays the same, by which mail programs know the copy.
 */
@Injectable()
export class MailSenderService implements OnApplicationShutdown {
  private readonly log = new Logger('Mail');
  private readonly transport;
  private readonly from: string;
  private running: Promise<void> | null = null;
  private stopped = false;

  constructor(
    @InjectRepository(Mail) private readonly mails: Repository<Mail>,
    private readonly transactions: Transactions,
    config: ConfigService<Settings, true>,
  ) {
    this.from = config.get('MAIL_FROM', { infer: true });
    const url = new URL(config.get('SMTP_URL', { infer: true }));
    this.transport = createTransport({
      pool: true,
      host: url.hostname,
      port: Number(url.port || (url.protocol === 'smtps:' ? 465 : 587)),
      secure: url.protocol === 'smtps:',
      maxConnections: CONNECTIONS,
      connectionTimeout: TIMEOUT,
      greetingTimeout: TIMEOUT,
      socketTimeout: TIMEOUT,
      ...(url.username
        ? { auth: { user: decodeURIComponent(url.username), pass: decodeURIComponent(url.password) } }
        : {}),
    });
  }

  @Interval(1_000)
  tick(): Promise<void> {
    this.running ??= this.sendDue()
      .catch((error: unknown) => this.log.error('The outbox could not be worked', error))
      .finally(() => (this.running = null));
    return this.running;
  }

  async onApplicationShutdown(): Promise<void> {
    this.stopped = true;
    await this.running;
    this.transport.close();
  }

  private async sendDue(): Promise<void> {
    while (!this.stopped) {
      const due = await this.mails.find({
        where: { state: 'queued', nextAttemptAt: LessThanOrEqual(new Date()) },
        order: { nextAttemptAt: 'ASC', id: 'ASC' },
        take: BATCH,
      });
      await Promise.all(due.map((mail) => this.send(mail)));
      if (due.length < BATCH) return;
    }
  }

  private async send(mail: Mail): Promise<void> {
    const attempts = mail.attempts + 1;
    let outcome: Partial<Mail>;
    try {
      await this.transport.sendMail({
        from: this.from,
        to: mail.to,
        subject: mail.subject,
        text: mail.text,
        html: mail.html,
        messageId: `<${createHash('sha256').update(mail.key).digest('hex').slice(0, 32)}@polewright>`,
        headers: { 'Auto-Submitted': 'auto-generated' },
      });
      outcome = { state: 'sent', sentAt: new Date(), error: null };
    } catch (error) {
      const gaveUp = attempts >= MAX_ATTEMPTS || isFinal(error);
      outcome = {
        state: gaveUp ? 'failed' : 'queued',
        error: error instanceof Error ? error.message : String(error),
        nextAttemptAt: new Date(Date.now() + retryDelay(attempts) * 1000),
      };
      this.log.warn(`Mail ${mail.id} to ${mail.to}, attempt ${attempts}: ${outcome.error}`);
    }
    sent.inc({ result: outcome.state === 'queued' ? 'retried' : (outcome.state ?? 'retried') });
    await this.transactions.run((manager) => manager.update(Mail, mail.id, { attempts, ...outcome }));
  }
}
