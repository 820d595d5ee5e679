import { ConflictException, Injectable, NotFoundException } from '@nestjs/common';
import { InjectRepository } from '@nestjs/typeorm';
import { Brackets, type EntityManager, Repository } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { User } from '../people/user.entity.js';
import { Mail, type Channel, type MailState } from './mail.entity.js';

export interface OutgoingMail {
  /** What the mail is about, once: a second mail with the same key is dropped. */
  key: string;
  /** "mail" where not given. */
  channel?: Channel;
  to: string;
  subject: string;
  text: string;
  html: string;
  alertId?: number | null;
  /** Whose administrators see it in the outbox, beside those of the recipient's sites. */
  siteId?: number | null;
  /** SVG that is shown above the text, and the same in words. */
  picture?: { svg: string; text: string } | null;
}

export interface MailFilter {
  state?: MailState;
  limit: number;
  /** Only mails before this one. */
  beforeId?: number;
}

/** Mails that must go out: written in the transaction of what they tell, sent afterwards, kept for the record. */
@Injectable()
export class MailOutboxService {
  constructor(
    @InjectRepository(Mail) private readonly mails: Repository<Mail>,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
  ) {}

  /** Puts a mail into the outbox; does nothing when its key is there already. */
  async enqueue(manager: EntityManager, mail: OutgoingMail): Promise<void> {
    const now = new Date();
    await manager
      .createQueryBuilder()
      .insert()
      .into(Mail)
      .values({
        key: mail.key,
        channel: mail.channel ?? 'mail',
        to: mail.to,
        subject: mail.subject,
        text: mail.text,
        html: mail.html,
        alertId: mail.alertId ?? null,
        siteId: mail.siteId ?? null,
        picture: mail.picture?.svg ?? null,
        pictureText: mail.picture?.text ?? null,
        createdAt: now,
        nextAttemptAt: now,
      })
      .orIgnore()
      .updateEntity(false)
      .execute();
  }

  /** Mails of the sites that a person administers and to the people of these sites, newest first. */
  async list(user: SignedInUser, filter: MailFilter): Promise<{ items: Mail[]; nextCursor: string | null }> {
    const query = this.visibleTo(user)
      .orderBy('mail.id', 'DESC')
      .take(filter.limit + 1);
    if (filter.state) query.andWhere('mail.state = :state', { state: filter.state });
    if (filter.beforeId) query.andWhere('mail.id < :beforeId', { beforeId: filter.beforeId });
    const found = await query.getMany();
    const items = found.slice(0, filter.limit);
    return { items, nextCursor: found.length > filter.limit ? String(items.at(-1)?.id) : null };
  }

  /**
   * Gives a mail that was given up, or waits for a later attempt, a fresh start.
   *
   * @throws ConflictException when it has gone out already
   */
  async resend(user: SignedInUser, id: number): Promise<Mail> {
    const mail = await this.visibleTo(user).andWhere('mail.id = :id', { id }).getOne();
    if (!mail) throw new NotFoundException(`There is no mail ${id}`);
    return this.transactions.run(async (manager) => {
      const { affected } = await manager
        .createQueryBuilder()
        .update(Mail)
        .set({ state: 'queued', attempts: 0, nextAttemptAt: new Date() })
        .where('id = :id AND state IN (:...open)', { id, open: ['queued', 'failed'] })
        .execute();
      if (!affected) throw new ConflictException('It has gone out already');
      await this.audit.record(manager, {
        user,
        action: 'mail.resent',
        subject: { type: 'mail', id },
        siteId: mail.siteId,
        note: mail.subject,
      });
      return manager.findOneByOrFail(Mail, { id });
    });
  }

  private visibleTo(user: SignedInUser) {
    const recipients = this.mails.manager
      .createQueryBuilder(User, 'person')
      .innerJoin('person.roles', 'role')
      .select('person.email')
      .where('role.siteId IN (:...sites)');
    return this.mails
      .createQueryBuilder('mail')
      .where(
        new Brackets((scope) =>
          scope.where('mail.siteId IN (:...sites)').orWhere(`mail.to IN (${recipients.getQuery()})`),
        ),
      )
      .setParameters({ sites: [-1, ...sitesOf(user, 'mail.manage')] });
  }
}
