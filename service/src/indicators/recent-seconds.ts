import { Injectable, type OnApplicationBootstrap } from '@nestjs/common';
import { OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { MoreThan, type DataSource } from 'typeorm';
import type { Events } from '../events.js';
import { IndicatorSecond } from './indicator-rollup.entity.js';
import { addUp, indicatorsOf, type Indicators } from './indicators.js';
import type { ClosedSecond } from './second-accumulator.js';

/** Seconds kept at hand per axis: what a tile's strips show. */
export const RECENT = 120;
/** Stretch over which an axis's present indicators are taken, s. */
export const INDICATOR_WINDOW = 60;

export type RecentIndicators = Readonly<Indicators & { at: Date; movingSeconds: number }>;

/** The last two minutes of every axis, in memory; after a restart they come back from the table. */
@Injectable()
export class RecentSeconds implements OnApplicationBootstrap {
  private readonly byAxis = new Map<number, ClosedSecond[]>();
  /** Indicators by axis and span, until its next second: several ask for the same at every beat. */
  private readonly known = new Map<number, Map<number, RecentIndicators>>();

  constructor(@InjectDataSource() private readonly dataSource: DataSource) {}

  async onApplicationBootstrap(): Promise<void> {
    const latest = await this.dataSource.getRepository(IndicatorSecond).find({
      where: { t: MoreThan(Math.floor(Date.now() / 1000) - RECENT) },
      order: { t: 'ASC' },
    });
    for (const second of latest) this.add(second.axisId, [second]);
  }

  // Before the other listeners of the same event, which read what is stored here.
  @OnEvent('seconds.closed', { prependListener: true })
  secondsClosed({ axisId, seconds }: Events['seconds.closed']): void {
    this.add(axisId, seconds);
  }

  /** Oldest first, at most two minutes back from the axis's newest second. */
  of(axisId: number): readonly ClosedSecond[] {
    return this.byAxis.get(axisId) ?? [];
  }

  /** Indicators over the last `span` seconds before the axis's newest one; null without any. */
  over(axisId: number, span = INDICATOR_WINDOW): RecentIndicators | null {
    const seconds = this.of(axisId);
    const newest = seconds.at(-1);
    if (!newest) return null;
    const bySpan = this.known.get(axisId) ?? new Map<number, RecentIndicators>();
    this.known.set(axisId, bySpan);
    let found = bySpan.get(span);
    if (!found) bySpan.set(span, (found = this.indicators(seconds, newest, span)));
    return found;
  }

  private indicators(seconds: readonly ClosedSecond[], newest: ClosedSecond, span: number): RecentIndicators {
    const sums = addUp(seconds.filter(({ t }) => t > newest.t - span));
    return {
      ...indicatorsOf(sums),
      at: new Date((newest.t + 1) * 1000),
      movingSeconds: sums.samples > 0 ? (sums.coveredSeconds * sums.movingSamples) / sums.samples : 0,
    };
  }

  private add(axisId: number, seconds: ClosedSecond[]): void {
    const kept = this.byAxis.get(axisId) ?? [];
    kept.push(...seconds);
    const newest = kept.at(-1)?.t ?? 0;
    while (kept.length > 0 && kept[0]!.t <= newest - RECENT) kept.shift();
    this.byAxis.set(axisId, kept);
    this.known.delete(axisId);
  }
}
