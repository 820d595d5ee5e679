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

/** Every estimate is kept this long, s; of older ones the last of each hour: a busy axis makes one every few seconds. */
export const ESTIMATES_WHOLE = DAY;

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
  /** Up to where an axis's estimates are thinned, s since the Unix epoch; found anew after a start. */
  private readonly thinned = new Map<number, number>();

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
      this.thin(found.id, now - ESTIMATES_WHOLE);
    } catch (error) {
      this.log.warn(`Old rows could not be deleted: ${(error as Error).message}`);
    }
  }

  private thin(axisId: number, until: number): void {
    const from =
      this.thinned.get(axisId) ?? Math.floor((until - this.settings.get().estimates) / HOUR) * HOUR;
    const to = Math.min(from + THINNED_PER_STEP, Math.floor(until / HOUR) * HOUR);
    if (to <= from) return;
    const { changes } = this.statements!.thin.run({ axisId, from, to, limit: ROWS_PER_STEP });
    this.count('plant_estimate_row', changes);
    if (changes < ROWS_PER_STEP) this.thinned.set(axisId, to);
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
         WHERE CAST("next" / ${HOUR} AS integer) = CAST("t" / ${HOUR} AS integer)
         LIMIT @limit)`,
    ),
  };
}
