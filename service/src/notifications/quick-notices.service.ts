import { Injectable } from '@nestjs/common';
import type { EntityManager } from 'typeorm';
import { User } from '../people/user.entity.js';
import { FLOOD_COUNT, FLOOD_SPAN } from './mail-grouping.js';
import { MailOutboxService } from './mail-outbox.service.js';
import { Mail, type Channel } from './mail.entity.js';
import { PushSubscription } from './push-subscription.entity.js';
import { Sms } from './sms.js';

export interface QuickNotice {
  /** A second one with the same key is dropped. */
  key: string;
  userId: number;
  title: string;
  body: string;
  alertId: number;
  siteId: number;
}

/** Short words to a person's browsers and phone, beside the mail that says all. */
@Injectable()
export class QuickNoticesService {
  constructor(
    private readonly outbox: MailOutboxService,
    private readonly sms: Sms,
  ) {}

  /** @returns the ways that it goes: of "push" and "SMS" those that the person has chosen */
  async tell(manager: EntityManager, notice: QuickNotice, now: Date): Promise<string[]> {
    const browsers = await manager.findBy(PushSubscription, { userId: notice.userId });
    const { phone, smsAlerts } = await manager.findOneByOrFail(User, { id: notice.userId });
    const ways: string[] = [];
    for (const { id } of browsers)
      if ((await this.put(manager, 'push', String(id), notice, now)) && !ways.includes('push'))
        ways.push('push');
    if (this.sms.offered && smsAlerts && phone && (await this.put(manager, 'sms', phone, notice, now)))
      ways.push('SMS');
    return ways;
  }

  /** In a flood one message says so, and the rest comes by mail alone. */
  private async put(
    manager: EntityManager,
    channel: Channel,
    to: string,
    { key, title, body, alertId, siteId }: QuickNotice,
    now: Date,
  ): Promise<boolean> {
    const lately = await manager
      .createQueryBuilder(Mail, 'mail')
      .where('mail.to = :to AND mail.channel = :channel', { to, channel })
      .andWhere('mail.createdAt > :since', { since: new Date(now.getTime() - FLOOD_SPAN) })
      .getCount();
    if (lately > FLOOD_COUNT) return false;
    const flood = lately === FLOOD_COUNT;
    await this.outbox.enqueue(manager, {
      key: `${key} ${channel} ${to}`,
      channel,
      to,
      alertId,
      siteId,
      subject: flood ? 'Flood of alerts' : title,
      text: flood
        ? `More than ${FLOOD_COUNT} in ten minutes; for a while further ones come by mail alone.`
        : body,
      html: '',
    });
    return true;
  }
}
