import { Injectable, NotFoundException } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { InjectDataSource } from '@nestjs/typeorm';
import ical, { ICalCalendarMethod, ICalEventStatus } from 'ical-generator';
import { IsNull, type DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { hashOfToken, newToken } from '../auth/passwords.js';
import { requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { UserRole } from '../people/user-role.entity.js';
import type { Settings } from '../settings.js';
import { CalendarFeed } from './calendar-feed.entity.js';
import { gapsBetween } from './shifts.js';
import { loadSiteRota, shiftsOf } from './site-rota.js';

/** ms */
const DAY = 24 * 3_600_000;
const BACK = 7 * DAY;
const AHEAD = 90 * DAY;
/** How often a calendar program should ask again, s. */
const REFRESH = 3_600;

/** Rotas for calendar programs: iCalendar (RFC 5545) at private addresses that can be taken back. */
@Injectable()
export class CalendarFeedsService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  /** A person's feeds that are not taken back. */
  list(user: SignedInUser): Promise<CalendarFeed[]> {
    return this.dataSource.getRepository(CalendarFeed).find({
      where: { userId: user.id, revokedAt: IsNull() },
      relations: { site: true },
      order: { id: 'ASC' },
    });
  }

  /** @returns the private address, which is shown this once */
  async create(user: SignedInUser, siteId: number, own: boolean): Promise<{ id: number; url: string }> {
    requireRole(user, siteId, 'see', `site ${siteId}`);
    const token = newToken();
    const { id } = await this.transactions.run(async (manager) => {
      const feed = await manager.save(
        manager.create(CalendarFeed, { userId: user.id, siteId, own, tokenHash: hashOfToken(token) }),
      );
      await this.audit.record(manager, {
        user,
        action: 'calendar-feed.made',
        subject: { type: 'calendar-feed', id: feed.id },
        siteId,
        after: { own },
      });
      return feed;
    });
    return { id, url: `${this.config.get('PUBLIC_URL', { infer: true })}/api/v1/calendar/${token}.ics` };
  }

  /** Takes an address back: from then on it answers as if it had never been. */
  async revoke(user: SignedInUser, id: number): Promise<void> {
    await this.transactions.run(async (manager) => {
      const feed = await manager.findOneBy(CalendarFeed, { id, userId: user.id, revokedAt: IsNull() });
      if (!feed) throw new NotFoundException(`There is no calendar feed ${id}`);
      await manager.update(CalendarFeed, id, { revokedAt: new Date() });
      await this.audit.record(manager, {
        user,
        action: 'calendar-feed.revoked',
        subject: { type: 'calendar-feed', id },
        siteId: feed.siteId,
      });
    });
  }

  /**
   * The calendar behind a private address: a week back and 90 days ahead. Times are instants in UTC, so that no
   * calendar program has to know the site's clock changes.
   *
   * @throws NotFoundException when the address is unknown or taken back, or its person has left the site
   */
  async calendar(token: string, now: Date): Promise<string> {
    const { manager } = this.dataSource;
    const feed = await manager.findOne(CalendarFeed, {
      where: { tokenHash: hashOfToken(token), revokedAt: IsNull(), user: { disabled: false } },
      relations: { user: true },
    });
    const role = feed && (await manager.findOneBy(UserRole, { userId: feed.userId, siteId: feed.siteId }));
    if (!feed || !role) throw new NotFoundException('There is no such calendar');
    const span = { from: new Date(now.getTime() - BACK), to: new Date(now.getTime() + AHEAD) };
    const rota = await loadSiteRota(manager, feed.siteId, span.from);
    const shifts = shiftsOf(rota, span);
    const { site } = rota;
    const calendar = ical({
      name: feed.own ? `On call: ${feed.user.name}, ${site.name}` : `On call: ${site.name}`,
      prodId: { company: 'Polewright', product: 'Rota', language: 'EN' },
      method: ICalCalendarMethod.PUBLISH,
      ttl: REFRESH,
    });
    for (const shift of shifts) {
      if (feed.own && shift.userId !== feed.userId) continue;
      const name = rota.available.get(shift.userId)?.name ?? `Person ${shift.userId}`;
      calendar.createEvent({
        id: `shift-${site.id}-${shift.userId}-${shift.from.getTime()}@polewright`,
        start: shift.from,
        end: shift.to,
        stamp: now,
        summary: `${name} on call, ${site.name}`,
        description: shift.override ? 'Stands in' : (shift.layer ?? ''),
        status: ICalEventStatus.CONFIRMED,
      });
    }
    if (!feed.own)
      for (const gap of gapsBetween(shifts, span))
        calendar.createEvent({
          id: `gap-${site.id}-${gap.from.getTime()}@polewright`,
          start: gap.from,
          end: gap.to,
          stamp: now,
          summary: `NOBODY on call, ${site.name}`,
        });
    await this.transactions.run((unit) => unit.update(CalendarFeed, feed.id, { lastReadAt: now }));
    return calendar.toString();
  }
}
