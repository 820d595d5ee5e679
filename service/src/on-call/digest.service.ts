import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import dayjs from 'dayjs';
import { In, MoreThan, Not, type DataSource } from 'typeorm';
import { Alert } from '../alerts/alert.entity.js';
import { RULE_TITLES } from '../alerts/rules.js';
import { mayDo } from '../auth/policy.js';
import { Transactions } from '../database/transactions.js';
import { Axis } from '../fleet/axis.entity.js';
import { Site } from '../fleet/site.entity.js';
import { groupBy } from '../group-by.js';
import { composeMail } from '../notifications/mail-text.js';
import { MailOutboxService } from '../notifications/mail-outbox.service.js';
import { Mail } from '../notifications/mail.entity.js';
import { UserRole } from '../people/user-role.entity.js';
import { LIVE_STATES, Proposal } from '../proposals/proposal.entity.js';
import { localInstant } from '../rota/shifts.js';
import type { Settings } from '../settings.js';

const HOUR = 3_600_000;
/** On the site's clock. */
const AT = '07:00';
/** A service that was down goes without the digest after this time, ms. */
const LATEST = 4 * HOUR;
/** Lines of a kind that a mail names. */
const NAMED = 20;

/** One mail each morning to the engineers of a site: how its axes are, what stands open. */
@Injectable()
export class DigestService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly outbox: MailOutboxService,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  @Interval(60_000)
  async sendDue(now = new Date()): Promise<void> {
    for (const site of await this.dataSource.getRepository(Site).find()) {
      const date = dayjs(now).tz(site.timeZone).format('YYYY-MM-DD');
      const due = localInstant(date, AT, site.timeZone);
      // A site that was registered today has no yesterday to tell of.
      if (now < due || now.getTime() - due.getTime() > LATEST || site.createdAt >= due) continue;
      await this.send(site, date, now);
    }
  }

  private async send(site: Site, date: string, now: Date): Promise<void> {
    const { manager } = this.dataSource;
    const roles = await manager.find(UserRole, {
      where: { siteId: site.id, user: { disabled: false, dailyDigest: true } },
      relations: { user: true },
    });
    const engineers = roles.filter(({ role }) => mayDo(role, 'proposal.work')).map(({ user }) => user);
    const keyOf = (userId: number): string => `digest ${site.id} ${date} ${userId}`;
    const known = await manager.findBy(Mail, { key: In(engineers.map(({ id }) => keyOf(id))) });
    const waiting = engineers.filter(({ id }) => !known.some(({ key }) => key === keyOf(id)));
    if (waiting.length === 0) return;
    const paragraphs = await this.paragraphs(site, now);
    const link = { label: 'Open the fleet', url: this.config.get('PUBLIC_URL', { infer: true }) };
    await this.transactions.run(async (unit) => {
      for (const { id, name, email } of waiting)
        await this.outbox.enqueue(unit, {
          key: keyOf(id),
          to: email,
          siteId: site.id,
          subject: `${site.name}: the axes this morning`,
          ...composeMail({
            greeting: `Good morning ${name},`,
            paragraphs,
            link,
            closing: 'You can switch this mail off in your profile.',
          }),
        });
    });
  }

  private async paragraphs({ id: siteId, timeZone }: Site, now: Date): Promise<string[]> {
    const { manager } = this.dataSource;
    const axes = await manager.findBy(Axis, { siteId });
    const counts = [...groupBy(axes, ({ state }) => state)].map(
      ([state, own]) => `${own.length} ${state.replaceAll('-', ' ')}`,
    );
    const amiss = axes.filter(({ state }) => state === 'out-of-tune' || state === 'drifting');
    const open = await manager.find(Alert, {
      where: { siteId, state: Not('normal') },
      relations: { axis: true },
      order: { raisedAt: 'ASC' },
    });
    const came = await manager.countBy(Alert, {
      siteId,
      raisedAt: MoreThan(new Date(now.getTime() - 24 * HOUR)),
    });
    const proposals = await manager.find(Proposal, {
      where: { siteId, state: In([...LIVE_STATES]) },
      relations: { axis: true },
    });
    const clock = (at: Date): string => dayjs(at).tz(timeZone).format('D MMM HH:mm');
    const named = (lines: string[]): string[] =>
      lines.length > NAMED ? [...lines.slice(0, NAMED), `… and ${lines.length - NAMED} more`] : lines;
    return [
      `${axes.length} axes: ${counts.join(', ') || 'none yet'}.`,
      ...named(amiss.map(({ tag, stateReason }) => `${tag}: ${stateReason}`)),
      `Alerts: ${open.length} open, ${came} came in the last 24 hours.`,
      ...named(
        open.map(
          ({ axis, rule, state, raisedAt }) =>
            `${axis.tag}: ${RULE_TITLES[rule]}, ${state.replaceAll('-', ' ')}, since ${clock(raisedAt)}`,
        ),
      ),
      `Proposals under way: ${proposals.length}.`,
      ...named(proposals.map(({ id, axis, state }) => `Proposal ${id} for ${axis.tag}: ${state}`)),
    ];
  }
}
