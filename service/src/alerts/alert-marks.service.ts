import { Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, MoreThan, type DataSource } from 'typeorm';
import { groupBy } from '../group-by.js';
import { AlertTimer } from './alert-timer.entity.js';
import { Alert, AlertEvent, type AlertState } from './alert.entity.js';

/**
 * Raised this often in `CHATTER_SPAN`, ms, it chatters. ANSI/ISA-18.2 (from memory) takes three times in a minute; with
 * off-delays of a minute that could never be, so the span is ours.
 */
const CHATTER_COUNT = 3;
const CHATTER_SPAN = 30 * 60_000;
/** Standing for longer than this, ms, it is stale (24 h: ANSI/ISA-18.2, from memory). */
const STALE_AFTER = 24 * 3_600_000;
const STANDING: readonly AlertState[] = ['unacknowledged', 'acknowledged'];

/** What is to be known of an alert beside itself. */
export interface Marks {
  chattering: boolean;
  stale: boolean;
  levelUnknownSince: Date | null;
}

/** Marks alerts that come and go, that stand for long, and whose level cannot be measured. */
@Injectable()
export class AlertMarks {
  constructor(@InjectDataSource() private readonly dataSource: DataSource) {}

  /** By the alert's number. */
  async of(alerts: readonly Alert[], at: Date): Promise<Map<number, Marks>> {
    const axisIds = [...new Set(alerts.map(({ axisId }) => axisId))];
    const timers = await this.dataSource.getRepository(AlertTimer).findBy({ axisId: In(axisIds) });
    const raises = groupBy(
      await this.dataSource.getRepository(AlertEvent).find({
        where: {
          action: 'raised',
          at: MoreThan(new Date(at.getTime() - CHATTER_SPAN)),
          alert: { axisId: In(axisIds) },
        },
        relations: { alert: true },
      }),
      ({ alert }) => `${alert.axisId} ${alert.rule}`,
    );
    return new Map(
      alerts.map(({ id, axisId, rule, state, standsSince, raisedAt }) => {
        const timer = timers.find((one) => one.axisId === axisId && one.rule === rule);
        const since = state === 'normal' ? null : (timer?.unknownSince ?? null);
        return [
          id,
          {
            chattering: (raises.get(`${axisId} ${rule}`)?.length ?? 0) >= CHATTER_COUNT,
            stale:
              STANDING.includes(state) && at.getTime() - (standsSince ?? raisedAt).getTime() > STALE_AFTER,
            levelUnknownSince: since === null ? null : new Date(since * 1000),
          },
        ];
      }),
    );
  }
}
