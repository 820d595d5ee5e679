import { BadRequestException, Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import { Between, type DataSource } from 'typeorm';
import { patternFrequency } from '../control/pole-placement.js';
import type { DriftDecision } from '../drift/drift-chart.js';
import { IndicatorHour, IndicatorMinute, IndicatorSecond } from '../indicators/indicator-rollup.entity.js';
import { indicatorsOf } from '../indicators/indicators.js';
import { PlantEstimateRow } from '../indicators/plant-estimate.entity.js';
import { pageOf, type Page } from '../page.js';
import { estimateDto } from './axes.service.js';
import type { Axis } from './axis.entity.js';
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
const DAY = 86_400;
const HOUR = 3_600;

/** What an axis did and was, by time. */
@Injectable()
export class HistoryService {
  constructor(@InjectDataSource() private readonly dataSource: DataSource) {}

  /** Estimates from oldest to newest. */
  async estimates(axis: Axis, query: SpanQuery): Promise<Page<HistoricEstimateDto>> {
    const { from, to } = span(query, DAY);
    const rows = await this.dataSource.getRepository(PlantEstimateRow).find({
      where: { axisId: axis.id, t: Between(from, to) },
      order: { t: 'ASC' },
      take: query.limit + 1,
    });
    return pageOf(rows, query.limit, cursorAfter, ({ t, estimate, chart }) => ({
      ...estimateDto(estimate, t),
      chart: chart && { gain: chartPoint(chart.gain), pole: chartPoint(chart.pole) },
    }));
  }

  /** Indicators per second, minute or hour, from oldest to newest. */
  async indicators(axis: Axis, query: IndicatorQuery): Promise<Page<IndicatorPointDto>> {
    const { from, to } = span(query, HOUR);
    const rows = await this.dataSource.getRepository<IndicatorSecond>(ROLLUPS[query.resolution]).find({
      where: { axisId: axis.id, t: Between(from, to) },
      order: { t: 'ASC' },
      take: query.limit + 1,
    });
    return pageOf(rows, query.limit, cursorAfter, (row) => ({
      at: new Date(row.t * 1000),
      ...indicatorsOf(row),
      samples: row.samples,
    }));
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
