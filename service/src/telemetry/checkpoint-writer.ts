import type { Database, Statement } from 'better-sqlite3';
import type { DataSource } from 'typeorm';
import { PEAK_COLUMNS, SUM_COLUMNS } from '../indicators/indicator-rollup.entity.js';
import type { RecordedMove } from '../indicators/move-recorder.js';
import type { ClosedSecond } from '../indicators/second-accumulator.js';
import { JUDGEMENT_PART } from './axis-checkpoint.entity.js';
import type { AxisPipeline, EstimateAfterWindow } from './axis-pipeline.js';
import type { GatewayProgress } from './gateway-progress.js';

/** What one axis got written. */
export interface WrittenAxis {
  axisId: number;
  seconds: ClosedSecond[];
  moves: RecordedMove[];
  estimates: EstimateAfterWindow[];
}

const COLUMNS = [...SUM_COLUMNS, ...PEAK_COLUMNS];

/** Adds a second to the row of its stretch: sums add, peaks take the larger. */
const mergeInto = (table: string): string => `
  INSERT INTO "${table}" ("axisId", "t", ${COLUMNS.map((c) => `"${c}"`).join(', ')})
  VALUES (?, ?, ${COLUMNS.map(() => '?').join(', ')})
  ON CONFLICT ("axisId", "t") DO UPDATE SET
    ${SUM_COLUMNS.map((c) => `"${c}" = "${c}" + excluded."${c}"`).join(', ')},
    ${PEAK_COLUMNS.map((c) => `"${c}" = max("${c}", excluded."${c}")`).join(', ')}`;

/**
 * Writes one checkpoint: roll-ups, moves, estimates, the pipelines' states and the gateways' sequences that belong to
 * them, all or nothing. It is synchronous from the first look at the pipelines to the commit, so no sample can come
 * between; it uses the connection's own prepared statements because the entity layer costs five times as much a row.
 */
export class CheckpointWriter {
  private readonly database: Database;
  private readonly second: Statement;
  private readonly minute: Statement;
  private readonly hour: Statement;
  private readonly move: Statement;
  private readonly estimate: Statement;
  private readonly state: Statement;
  private readonly gateway: Statement;

  constructor(dataSource: DataSource) {
    this.database = (dataSource.driver as unknown as { databaseConnection: Database }).databaseConnection;
    this.second = this.database.prepare(mergeInto('indicator_second'));
    this.minute = this.database.prepare(mergeInto('indicator_minute'));
    this.hour = this.database.prepare(mergeInto('indicator_hour'));
    this.move = this.database.prepare(
      `INSERT OR REPLACE INTO "move_record" ("axisId", "t", "revision", "distance", "duration", "peakError", "rmsError", "saturatedPct")
       VALUES (@axisId, @t, @revision, @distance, @duration, @peakError, @rmsError, @saturatedPct)`,
    );
    this.estimate = this.database.prepare(
      `INSERT OR REPLACE INTO "plant_estimate_row" ("axisId", "t", "estimate", "chart") VALUES (?, ?, ?, ?)`,
    );
    this.state = this.database.prepare(
      `INSERT INTO "axis_checkpoint" ("axisId", "part", "state") VALUES (?, ?, ?)
       ON CONFLICT ("axisId", "part") DO UPDATE SET "state" = excluded."state"`,
    );
    this.gateway = this.database.prepare(
      `UPDATE "gateway" SET "epoch" = ?, "durableSequence" = ?, "lastSeenAt" = ? WHERE "id" = ?`,
    );
  }

  /**
   * @returns what was written, axis by axis, after the commit
   * @throws what SQLite throws; then nothing was written and the pipelines still hold everything
   */
  write(pipelines: readonly AxisPipeline[], gateways: readonly GatewayProgress[]): WrittenAxis[] {
    if (this.database.inTransaction) throw new Error('another transaction is open');
    const touched = pipelines.filter((pipeline) => pipeline.touched);
    const moved = gateways.filter((gateway) => gateway.received !== gateway.durable);
    if (touched.length === 0 && moved.length === 0) return [];
    try {
      this.database.transaction(() => {
        for (const pipeline of touched) this.writeAxis(pipeline);
        for (const { id, epoch, received, lastSeenAt } of moved)
          this.gateway.run(epoch, received, lastSeenAt === null ? null : sqliteTime(lastSeenAt), id);
      })();
    } catch (error) {
      for (const pipeline of touched) pipeline.forgetWritten();
      throw error;
    }
    for (const gateway of moved) gateway.durable = gateway.received;
    return touched.map((pipeline) => {
      const written = {
        axisId: pipeline.facts.id,
        seconds: pipeline.closedSeconds,
        moves: pipeline.closedMoves,
        estimates: pipeline.closedEstimates,
      };
      pipeline.closedSeconds = [];
      pipeline.closedMoves = [];
      pipeline.closedEstimates = [];
      pipeline.touched = false;
      pipeline.accept();
      return written;
    });
  }

  private writeAxis(pipeline: AxisPipeline): void {
    const axisId = pipeline.facts.id;
    for (const second of pipeline.closedSeconds) {
      const { t } = second;
      const row: number[] = [axisId, t];
      for (const column of COLUMNS) row.push(second[column]);
      this.second.run(row);
      row[1] = t - (t % 60);
      this.minute.run(row);
      row[1] = t - (t % 3600);
      this.hour.run(row);
    }
    for (const move of pipeline.closedMoves) this.move.run({ ...move, axisId });
    for (const { t, estimate, decisions } of pipeline.closedEstimates)
      this.estimate.run(axisId, t, JSON.stringify(estimate), decisions && JSON.stringify(decisions));
    const judgement = pipeline.changedJudgement();
    if (judgement !== null) this.state.run(axisId, JUDGEMENT_PART, Buffer.from(judgement));
    pipeline.image.writeChanged((part, bytes) => this.state.run(axisId, part, bytes));
  }
}

/** The text form in which TypeORM keeps times in SQLite: UTC, "2026-12-01 05:16:39.000". */
const sqliteTime = (ms: number): string => new Date(ms).toISOString().replace('T', ' ').replace('Z', '');
