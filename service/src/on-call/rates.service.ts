import { Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import dayjs from 'dayjs';
import { In, LessThan, type DataSource } from 'typeorm';
import { Alert, AlertEvent, PRIORITIES, type Priority } from '../alerts/alert.entity.js';
import { RULE_TITLES, type RuleName } from '../alerts/rules.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { Axis } from '../fleet/axis.entity.js';
import { groupBy } from '../group-by.js';
import { RotaService, type RotaView } from '../rota/rota.service.js';
import type { FrequentAlertDto, PersonRateDto, RatesDto } from './dto/rates.dto.js';
import { chatters, floodsOf, loadOf, percentile, PUBLISHED, waits, type Raised } from './rates.js';

const HOUR = 3_600_000;
const DAY = 24 * HOUR;
const MOST_FREQUENT = 10;

type RaisedAlert = Raised & { rule: RuleName; priority: Priority };

/** How many alerts come, to whom, which, and how long they wait. */
@Injectable()
export class RatesService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly rota: RotaService,
  ) {}

  /** A site's alert rates over the last days, beside the published figures. */
  async of(user: SignedInUser, siteId: number, days: number, now: Date): Promise<RatesDto> {
    const from = new Date(now.getTime() - days * DAY);
    const rota = await this.rota.view(user, siteId, from, now);
    const { timeZone } = rota.site;
    const raised = await this.eventsOf(siteId, 'raised', from, now);
    const acknowledged = await this.eventsOf(siteId, 'acknowledged', from, now);
    const floods = floodsOf(raised.map(({ at }) => at));
    const floodTime = floods.reduce((sum, flood) => sum + flood.to - flood.from, 0);
    const byKind = await this.byKind(raised);
    const dateOf = (at: number | Date): string => dayjs(at).tz(timeZone).format('YYYY-MM-DD');
    const byDate = groupBy(raised, ({ at }) => dateOf(at));
    const dates = Array.from({ length: days + 1 }, (_, i) => dateOf(from.getTime() + i * DAY));
    const waited = waits(raised, acknowledged);
    return {
      siteId,
      timeZone,
      from: from.toISOString(),
      to: now.toISOString(),
      alerts: raised.length,
      perDay: raised.length / days,
      days: [...new Set(dates)].map((date) => ({ date, alerts: byDate.get(date)?.length ?? 0 })),
      people: peopleOf(rota, raised, from, now, dateOf),
      floods: floods
        .map((flood) => ({
          from: new Date(flood.from).toISOString(),
          to: new Date(flood.to).toISOString(),
          alerts: flood.alerts,
        }))
        .reverse(),
      floodPct: (100 * floodTime) / (now.getTime() - from.getTime()),
      frequent: byKind.slice(0, MOST_FREQUENT),
      chattering: byKind.filter(({ chattering }) => chattering),
      standing: await this.standing(siteId, now),
      acknowledging: PRIORITIES.map((priority) => {
        const own = waited.filter((_, i) => raised[i]!.priority === priority);
        const answered = own.filter((wait) => wait !== null);
        const seconds = (share: number): number | null => {
          const wait = percentile(answered, share);
          return wait === null ? null : wait / 1000;
        };
        return {
          priority,
          alerts: own.length,
          unanswered: own.length - answered.length,
          medianSeconds: seconds(0.5),
          ninthDecileSeconds: seconds(0.9),
        };
      }),
      published: {
        acceptablePerDay: PUBLISHED.acceptablePerDay,
        manageablePerDay: PUBLISHED.manageablePerDay,
        floodAlerts: PUBLISHED.flood.alerts,
        source: 'ANSI/ISA-18.2-2016 and EEMUA 191, from memory',
      },
    };
  }

  private async eventsOf(siteId: number, action: string, from: Date, to: Date): Promise<RaisedAlert[]> {
    const rows: (Omit<RaisedAlert, 'at'> & { at: string })[] = await this.dataSource
      .createQueryBuilder(AlertEvent, 'event')
      .innerJoin('event.alert', 'alert')
      .select([])
      .addSelect('event.at', 'at')
      .addSelect('alert.id', 'alertId')
      .addSelect('alert.axisId', 'axisId')
      .addSelect('alert.rule', 'rule')
      .addSelect('alert.priority', 'priority')
      .where('alert.siteId = :siteId AND event.action = :action', { siteId, action })
      .andWhere('event.at >= :from AND event.at < :to', { from, to })
      .orderBy('event.at')
      .addOrderBy('event.id')
      .getRawMany();
    // SQLite holds times as text in UTC without saying so.
    return rows.map((row) => ({ ...row, at: Date.parse(`${row.at.replace(' ', 'T')}Z`) }));
  }

  /** By axis and rule, the most frequent first. */
  private async byKind(raised: readonly RaisedAlert[]): Promise<FrequentAlertDto[]> {
    const kinds = [...groupBy(raised, ({ axisId, rule }) => `${axisId} ${rule}`).values()];
    const axes = await this.dataSource
      .getRepository(Axis)
      .find({ select: { id: true, tag: true }, where: { id: In(kinds.map(([first]) => first!.axisId)) } });
    const tags = new Map(axes.map(({ id, tag }) => [id, tag]));
    return kinds
      .map((alerts) => ({
        axisId: alerts[0]!.axisId,
        axisTag: tags.get(alerts[0]!.axisId) ?? `Axis ${alerts[0]!.axisId}`,
        title: RULE_TITLES[alerts[0]!.rule],
        alerts: alerts.length,
        sharePct: (100 * alerts.length) / raised.length,
        chattering: chatters(alerts.map(({ at }) => at)),
      }))
      .sort((a, b) => b.alerts - a.alerts || a.axisTag.localeCompare(b.axisTag));
  }

  private async standing(siteId: number, now: Date): Promise<RatesDto['standing']> {
    const alerts = await this.dataSource.getRepository(Alert).find({
      where: {
        siteId,
        state: In(['unacknowledged', 'acknowledged']),
        raisedAt: LessThan(new Date(now.getTime() - PUBLISHED.stale)),
      },
      relations: { axis: true },
      order: { raisedAt: 'ASC' },
    });
    return alerts.map(({ id, axis, rule, state, raisedAt }) => ({
      alertId: id,
      axisTag: axis.tag,
      title: RULE_TITLES[rule],
      state,
      raisedAt: raisedAt.toISOString(),
    }));
  }
}

/** Alerts of each person on call, by the rota as it is written now; those of a gap are nobody's. */
function peopleOf(
  { shifts, gaps, people }: RotaView,
  raised: readonly Raised[],
  from: Date,
  to: Date,
  dateOf: (at: number) => string,
): PersonRateDto[] {
  const spans = [
    ...shifts.map((shift) => ({ ...shift, userId: shift.userId as number | null })),
    ...gaps.map((gap) => ({ ...gap, userId: null })),
  ];
  return [...groupBy(spans, ({ userId }) => userId)]
    .map(([userId, own]) => {
      const hours = own.reduce((sum, span) => sum + Math.min(+span.to, +to) - Math.max(+span.from, +from), 0);
      const alerts = raised.filter(({ at }) => own.some((span) => +span.from <= at && at < +span.to));
      const daily = [...groupBy(alerts, ({ at }) => dateOf(at)).values()].map(({ length }) => length);
      const busiestDay = Math.max(0, ...daily);
      return {
        userId,
        name: userId === null ? 'Nobody on call' : (people.get(userId)?.name ?? `Person ${userId}`),
        hoursOnCall: hours / HOUR,
        alerts: alerts.length,
        perDay: (alerts.length * DAY) / hours,
        busiestDay,
        load: loadOf(busiestDay),
      };
    })
    .sort((a, b) => b.alerts - a.alerts || a.name.localeCompare(b.name));
}
