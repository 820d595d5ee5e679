import { BadRequestException, Injectable, NotFoundException } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { User } from '../people/user.entity.js';
import type { ChoicesDto, SetChoicesDto, SubscribeDto } from './dto/choices.dto.js';
import { PushSubscription } from './push-subscription.entity.js';
import { WebPush } from './push.js';
import { Sms } from './sms.js';

/** Browsers of one person; the oldest gives way. */
const MOST_BROWSERS = 10;

/** By which ways a person wants to be told. */
@Injectable()
export class ChoicesService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly push: WebPush,
    private readonly sms: Sms,
  ) {}

  async of({ id }: SignedInUser): Promise<ChoicesDto> {
    const { manager } = this.dataSource;
    const { dailyDigest, phone, smsAlerts } = await manager.findOneByOrFail(User, { id });
    const subscriptions = await manager.find(PushSubscription, {
      where: { userId: id },
      order: { id: 'ASC' },
    });
    return {
      dailyDigest,
      phone,
      smsAlerts,
      smsOffered: this.sms.offered,
      pushKey: this.push.publicKey,
      subscriptions: subscriptions.map((one) => ({
        id: one.id,
        endpoint: one.endpoint,
        browser: one.browser,
        createdAt: one.createdAt.toISOString(),
      })),
    };
  }

  async set(user: SignedInUser, choices: SetChoicesDto): Promise<void> {
    if (choices.smsAlerts && !choices.phone)
      throw new BadRequestException({ errors: [{ path: 'phone', message: 'SMS needs a number' }] });
    await this.transactions.run(async (manager) => {
      const { dailyDigest, phone, smsAlerts } = await manager.findOneByOrFail(User, { id: user.id });
      await manager.update(User, user.id, { ...choices });
      await this.audit.record(manager, {
        user,
        action: 'person.choices-changed',
        subject: { type: 'person', id: user.id },
        before: { dailyDigest, smsAlerts, phone: phone !== null },
        after: { ...choices, phone: choices.phone !== null },
      });
    });
  }

  /** A browser shows push messages from now on; the same one again replaces its former keys, whoever it was. */
  async subscribe(user: SignedInUser, { endpoint, keys, browser }: SubscribeDto): Promise<void> {
    await this.transactions.run(async (manager) => {
      await manager.delete(PushSubscription, { endpoint });
      const own = await manager.find(PushSubscription, {
        where: { userId: user.id },
        order: { id: 'ASC' },
      });
      for (const { id } of own.slice(0, Math.max(0, own.length - MOST_BROWSERS + 1)))
        await manager.delete(PushSubscription, id);
      await manager.insert(PushSubscription, { userId: user.id, endpoint, browser, ...keys });
    });
  }

  async unsubscribe(user: SignedInUser, id: number): Promise<void> {
    await this.transactions.run(async (manager) => {
      const { affected } = await manager.delete(PushSubscription, { id, userId: user.id });
      if (!affected) throw new NotFoundException(`There is no browser ${id}`);
    });
  }
}
