import { Injectable, Logger, type OnApplicationShutdown } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectRepository } from '@nestjs/typeorm';
import { Counter } from 'prom-client';
import { In, IsNull, LessThanOrEqual, Not, Repository } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import type { Settings } from '../settings.js';
import { Refused, Uncertain, type ChannelSender } from './channels.js';
import { groupFlood } from './mail-grouping.js';
import { Mail, type Channel } from './mail.entity.js';
import { WebPush } from './push.js';
import { Sms } from './sms.js';
import { Smtp } from './smtp.js';

/** Messages that are sent at once. */
const BATCH = 20;
export const MAX_ATTEMPTS = 20;
/** s */
const FIRST_DELAY = 5;
const LONGEST_DELAY = 600;

const sent = new Counter({
  name: 'polewright_mail_total',
  help: 'Attempts to send a mail, push message or SMS by result',
  labelNames: ['result'] as const,
});

/** Seconds to wait after the n-th attempt has failed: 5, 10, 20 … up to 10 minutes. */
export const retryDelay = (attempts: number): number =>
  Math.min(FIRST_DELAY * 2 ** (attempts - 1), LONGEST_DELAY);

/**
 * Carries the outbox to those who take it. An attempt is marked before it begins and after it ended: when the service
 * was stopped between the two, the message goes out again rather than never, and says that it may be a second copy.
 */
@Injectable()
export class MailSenderService implements OnApplicationShutdown {
  private readonly log = new Logger('Mail');
  private readonly channels: Record<Channel, ChannelSender>;
  private readonly publicUrl: string;
  private running: Promise<void> | null = null;
  private stopped = false;
  private cutOffLookedAt = false;

  constructor(
    @InjectRepository(Mail) private readonly mails: Repository<Mail>,
    private readonly transactions: Transactions,
    smtp: Smtp,
    push: WebPush,
    sms: Sms,
    config: ConfigService<Settings, true>,
  ) {
    this.channels = { mail: smtp, push, sms };
    this.publicUrl = config.get('PUBLIC_URL', { infer: true });
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
  }

  private async sendDue(): Promise<void> {
    if (!this.cutOffLookedAt) await this.takeUpCutOff();
    while (!this.stopped) {
      const now = new Date();
      const due = await this.transactions.run(async (manager) => {
        await groupFlood(manager, now, this.publicUrl);
        const found = await manager.find(Mail, {
          where: { state: 'queued', nextAttemptAt: LessThanOrEqual(now) },
          order: { nextAttemptAt: 'ASC', id: 'ASC' },
          take: BATCH,
        });
        if (found.length > 0)
          await manager.update(Mail, { id: In(found.map(({ id }) => id)) }, { startedAt: now });
        return found;
      });
      await Promise.all(due.map((mail) => this.send(mail)));
      if (due.length < BATCH) return;
    }
  }

  /** Attempts that the service's last run began and did not end. */
  private async takeUpCutOff(): Promise<void> {
    await this.transactions.run((manager) =>
      manager.update(
        Mail,
        { state: 'queued', startedAt: Not(IsNull()) },
        { startedAt: null, perhapsAgain: true, nextAttemptAt: new Date() },
      ),
    );
    this.cutOffLookedAt = true;
  }

  private async send(mail: Mail): Promise<void> {
    const attempts = mail.attempts + 1;
    let outcome: Partial<Mail>;
    try {
      await this.channels[mail.channel].send(mail);
      outcome = { state: 'sent', sentAt: new Date(), error: null };
    } catch (error) {
      const gaveUp = attempts >= MAX_ATTEMPTS || error instanceof Refused;
      outcome = {
        state: gaveUp ? 'failed' : 'queued',
        error: error instanceof Error ? error.message : String(error),
        nextAttemptAt: new Date(Date.now() + retryDelay(attempts) * 1000),
        ...(error instanceof Uncertain && { perhapsAgain: true }),
      };
      this.log.warn(`Mail ${mail.id} to ${mail.to}, attempt ${attempts}: ${outcome.error}`);
    }
    sent.inc({ result: outcome.state === 'queued' ? 'retried' : (outcome.state ?? 'retried') });
    await this.transactions.run((manager) =>
      manager.update(Mail, mail.id, { attempts, startedAt: null, ...outcome }),
    );
  }
}
