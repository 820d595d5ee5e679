import { Injectable, Logger } from '@nestjs/common';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import type { Database, Statement } from 'better-sqlite3';
import { Counter } from 'prom-client';
import type { DataSource } from 'typeorm';
import { KIND_OF, type RetentionKind } from './retention.js';
import { RetentionSettings } from './retention-settings.service.js';

const HOUR = 3_600;
const DAY = 24 * HOUR;

/**
 * Of estimates older than `after` the last of each `unit` stays, both in s. A busy axis makes one every few seconds: a
 * day of all of them would be some 12 MB an axis, more than three years of one an hour. A day's chart shows 600 points.
 */
export const ESTIMATES_THINNED = [
  { after: 2 * HOUR, unit: 120 },
  { after: DAY, unit: HOUR },
] as const;

/** One axis is looked at every so often, ms. */
const STEP_MS = 100;
/** Rows that one statement deletes at most, so that intake never waits for it. */
const ROWS_PER_STEP = 500;
/** Stretch of estimates thinned in one step, s. */
const THINNED_PER_STEP = 10 * DAY;

const prunedRows = new Counter({
  name: 'polewright_rows_pruned_total',
  help: 'Rows deleted because their time was over',
  labelNames: ['table'],
});

interface Statements {
  next: Statement;
  prune: [table: string, kind: RetentionKind, statement: Statement][];
  thin: Statement;
}

/** Deletes what is older than it is kept: one axis at a time, a few hundred rows at a time. */
@Injectable()
export class RetentionService {
  private readonly log = new Logger(RetentionService.name);
  private statements: Statements | null = null;
  private lastAxis = 0;
  /** Up to where an axis's estimates are thinned to a unit, s since the Unix epoch, by unit; found anew after a start. */
  private readonly thinned = new Map<number, Map<number, number>>(
    ESTIMATES_THINNED.map(({ unit }) => [unit, new Map()]),
  );

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly settings: RetentionSettings,
  ) {}

  /** Looks at the next axis, in turn. */
  @Interval(STEP_MS)
  step(now = Date.now() / 1000): void {
    const { databaseConnection } = this.dataSource.driver as unknown as { databaseConnection: Database };
    // Inside somebody's transaction this could be taken back with it; the next step will do.
    if (databaseConnection.inTransaction) return;
    try {
      this.statements ??= prepare(databaseConnection);
      const { next, prune } = this.statements;
      const found = next.get(this.lastAxis) as { id: number } | undefined;
      this.lastAxis = found?.id ?? 0;
      if (!found) return;
      const kept = this.settings.get();
      for (const [table, kind, statement] of prune)
        this.count(table, statement.run(found.id, now - kept[kind]).changes);
      // What the coarser unit is due for is left to it.
      let from = now - kept.estimates;
      for (const { after, unit } of [...ESTIMATES_THINNED].reverse()) {
        this.thin(found.id, from, now - after, unit);
        from = now - after;
      }
    } catch (error) {
      this.log.warn(`Old rows could not be deleted: ${(error as Error).message}`);
    }
  }

  private thin(axisId: number, earliest: number, until: number, unit: number): void {
    const thinned = this.thinned.get(unit)!;
    const from = thinned.get(axisId) ?? Math.floor(earliest / unit) * unit;
    const to = Math.min(from + THINNED_PER_STEP, Math.floor(until / unit) * unit);
    if (to <= from) return;
    const { changes } = this.statements!.thin.run({ axisId, from, to, unit, limit: ROWS_PER_STEP });
    this.count('plant_estimate_row', changes);
    if (changes < ROWS_PER_STEP) thinned.set(axisId, to);
  }

  private count(table: string, rows: number): void {
    if (rows > 0) prunedRows.inc({ table }, rows);
  }
}

function prepare(database: Database): Statements {
  return {
    next: database.prepare(`SELECT "id" FROM "axis" WHERE "id" > ? ORDER BY "id" LIMIT 1`),
    prune: Object.entries(KIND_OF).map(([table, kind]) => [
      table,
      kind,
      database.prepare(
        `DELETE FROM "${table}" WHERE ("axisId", "t") IN (
           SELECT "axisId", "t" FROM "${table}" WHERE "axisId" = ? AND "t" < ? ORDER BY "t" LIMIT ${ROWS_PER_STEP})`,
      ),
    ]),
    thin: database.prepare(
      `DELETE FROM "plant_estimate_row" WHERE ("axisId", "t") IN (
         SELECT "axisId", "t" FROM (
           SELECT "axisId", "t", lead("t") OVER (ORDER BY "t") AS "next" FROM "plant_estimate_row"
           WHERE "axisId" = @axisId AND "t" >= @from AND "t" < @to)
         WHERE CAST("next" / @unit AS integer) = CAST("t" / @unit AS integer)
         LIMIT @limit)`,
    ),
  };
}
