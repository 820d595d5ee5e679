import { BadRequestException, Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import { Between, In, type DataSource } from 'typeorm';
import { patternFrequency } from '../control/pole-placement.js';
import type { DriftDecision } from '../drift/drift-chart.js';
import {
  IndicatorHour,
  IndicatorMinute,
  IndicatorSecond,
  PEAK_COLUMNS,
  SUM_COLUMNS,
} from '../indicators/indicator-rollup.entity.js';
import { indicatorsOf, type IndicatorSums } from '../indicators/indicators.js';
import { PlantEstimateRow } from '../indicators/plant-estimate.entity.js';
import { pageOf, type Page } from '../page.js';
import { RetentionSettings } from '../storage/retention-settings.service.js';
import { estimateDto } from './axes.service.js';
import type { Axis } from './axis.entity.js';
import { chartStep } from './chart-step.js';
import type {
  ChartPointDto,
  HistoricEstimateDto,
  IndicatorPointDto,
  IndicatorQuery,
  SpanQuery,
  TuningRevisionDto,
} from './dto/history.dto.js';
import { TuningRevision } from './tuning-revision.entity.js';

const ROLLUPS = { second: IndicatorSecond, minute: IndicatorMinute, hour: IndicatorHour };
const SUMS = [
  ...SUM_COLUMNS.map((column) => `sum("${column}") AS "${column}"`),
  ...PEAK_COLUMNS.map((column) => `max("${column}") AS "${column}"`),
].join(', ');
const DAY = 86_400;
const HOUR = 3_600;

/** What an axis did and was, by time. */
@Injectable()
export class HistoryService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly retention: RetentionSettings,
  ) {}

  /** Estimates from oldest to newest. */
  async estimates(axis: Axis, query: SpanQuery): Promise<Page<HistoricEstimateDto>> {
    const { from, to } = span(query, DAY);
    const repository = this.dataSource.getRepository(PlantEstimateRow);
    if (query.points !== undefined) {
      const times = await this.lastOfEach(axis.id, from, to, query.points);
      const rows = await repository.find({ where: { axisId: axis.id, t: In(times) }, order: { t: 'ASC' } });
      return { items: rows.map(historicEstimate), nextCursor: null };
    }
    const rows = await repository.find({
      where: { axisId: axis.id, t: Between(from, to) },
      order: { t: 'ASC' },
      take: query.limit + 1,
    });
    return pageOf(rows, query.limit, cursorAfter, historicEstimate);
  }

  /** Times of the newest estimate at the end of each of so many equal stretches, one seek in the index for each. */
  private async lastOfEach(axisId: number, from: number, to: number, points: number): Promise<number[]> {
    const ends = Array.from({ length: points }, (_, k) => from + ((k + 1) * (to - from)) / points);
    const rows = (await this.dataSource.query(
      `SELECT DISTINCT (SELECT max("t") FROM "plant_estimate_row"
                        WHERE "axisId" = ? AND "t" BETWEEN ? AND "end"."value") AS "t"
       FROM json_each(?) "end"`,
      [axisId, from, JSON.stringify(ends)],
    )) as { t: number | null }[];
    return rows.flatMap(({ t }) => t ?? []);
  }

  /** Indicators per second, minute or hour, from oldest to newest. */
  async indicators(axis: Axis, query: IndicatorQuery): Promise<Page<IndicatorPointDto>> {
    const { from, to } = span(query, HOUR);
    if (query.points !== undefined) return this.indicatorChart(axis.id, from, to, query.points);
    const rows = await this.dataSource.getRepository<IndicatorSecond>(ROLLUPS[query.resolution]).find({
      where: { axisId: axis.id, t: Between(from, to) },
      order: { t: 'ASC' },
      take: query.limit + 1,
    });
    return pageOf(rows, query.limit, cursorAfter, indicatorPoint);
  }

  /** Roll-ups added up by the database to the steps of a chart, from the coarsest roll-up that they consist of. */
  private async indicatorChart(
    axisId: number,
    from: number,
    to: number,
    points: number,
  ): Promise<Page<IndicatorPointDto>> {
    const { step, resolution } = chartStep(from, to, points, this.retention.get());
    const rows = (await this.dataSource.query(
      `SELECT CAST("t" / ${step} AS integer) * ${step} AS "start", ${SUMS}
       FROM "indicator_${resolution}" WHERE "axisId" = ? AND "t" BETWEEN ? AND ?
       GROUP BY "start" ORDER BY "start"`,
      [axisId, from, to],
    )) as (IndicatorSums & { start: number })[];
    return { items: rows.map((row) => indicatorPoint({ ...row, t: row.start })), nextCursor: null };
  }

  /** Tuning revisions, newest first. */
  async tunings(axis: Axis): Promise<TuningRevisionDto[]> {
    const rows = await this.dataSource
      .getRepository(TuningRevision)
      .find({ where: { axisId: axis.id }, order: { revision: 'DESC' } });
    return rows.map((row) => ({
      revision: row.revision,
      current: row.revision === axis.revision,
      structure: row.structure,
      pattern: row.pattern,
      lambda: row.pattern && patternFrequency(row.pattern),
      feedForward: row.feedForward,
      gains: row.gains,
      plant: row.plant && { gain: row.plant.gain, pole: row.plant.pole },
      source: row.source,
      proposalId: row.proposalId,
      appliedAt: row.appliedAt,
      appliedBy: row.appliedBy,
      note: row.note,
    }));
  }
}

const historicEstimate = ({ t, estimate, chart }: PlantEstimateRow): HistoricEstimateDto => ({
  ...estimateDto(estimate, t),
  chart: chart && { gain: chartPoint(chart.gain), pole: chartPoint(chart.pole) },
});

const indicatorPoint = (row: IndicatorSums & { t: number }): IndicatorPointDto => ({
  at: new Date(row.t * 1000),
  ...indicatorsOf(row),
  samples: row.samples,
});

const chartPoint = ({ ewma, lowerLimit, upperLimit, cusumShare, state }: DriftDecision): ChartPointDto => ({
  ewma: ewma ?? 1,
  low: lowerLimit,
  high: upperLimit,
  cusumShare,
  state,
});

/** A cursor is the time of the last row given, in s: the next page starts after it. */
const cursorAfter = ({ t }: { t: number }): string => String(t);

function span({ from, to, cursor }: SpanQuery, reach: number): { from: number; to: number } {
  const end = (to ?? new Date()).getTime() / 1000;
  let start = from ? from.getTime() / 1000 : end - reach;
  if (start > end)
    throw new BadRequestException({ errors: [{ path: 'from', message: 'must not be after to' }] });
  if (cursor !== undefined) {
    const after = Number(cursor);
    if (!Number.isFinite(after))
      throw new BadRequestException({ errors: [{ path: 'cursor', message: 'is none that this list gave' }] });
    start = after + 1e-6;
  }
  return { from: start, to: end };
}
