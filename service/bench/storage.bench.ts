import Database from 'better-sqlite3';
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import type { DataSource } from 'typeorm';
import { AxisPipeline } from '../dist/telemetry/axis-pipeline.js';
import { CheckpointWriter } from '../dist/telemetry/checkpoint-writer.js';
import { ProductionAxis } from '../test/support/production-axis.js';
import { startProcess } from '../test/support/service-process.js';
import { makeFleet, type BenchFleet } from './intake/fleet.js';
import { accessToken, metrics } from './intake/run-load.js';
import { round, type BenchRecord } from './measure.js';

/** Axes of the checkpoints, and how many seconds of them. */
const WRITTEN_AXES = Number(process.env.BENCH_STORAGE_WRITTEN_AXES ?? 1_000);
const WRITTEN_SECONDS = Number(process.env.BENCH_STORAGE_WRITTEN_SECONDS ?? 20);
/** Axes and days of minutes that histories are asked of: 200 × 90 days are 25.9 million rows, about 3 GB of disk. */
const AXES = Number(process.env.BENCH_STORAGE_AXES ?? 200);
const DAYS = Number(process.env.BENCH_STORAGE_DAYS ?? 90);
/** Requests of each kind. */
const ASKED = Number(process.env.BENCH_STORAGE_REQUESTS ?? 100);
const CHART_POINTS = 600;
const DAY = 86_400;
const CPU = 'process_cpu_seconds_total';

/** Writing by the checkpoint, and histories of a large plant by the built service over HTTP. */
export default async function bench(): Promise<BenchRecord[]> {
  return [...checkpointRows(), ...(await histories())];
}

type Statement = [sql: string, parameters: unknown[]];

/**
 * Rows a second of the checkpoint: from the pipelines, over what of them changed, to the commit. Floor: the same
 * statements with the same values, written down before, through better-sqlite3 alone.
 */
function checkpointRows(): BenchRecord[] {
  const folder = mkdtempSync(join(tmpdir(), 'polewright-bench-'));
  try {
    const databases = ['service', 'bare'].map((name) => open(join(folder, `${name}.sqlite`)));
    const [own, bare] = databases as [Database.Database, Database.Database];
    const statements: Statement[] = [];
    const writer = new CheckpointWriter(sourceOf(own));
    const recorder = new CheckpointWriter(sourceOf(writingDown(statements)));
    const fleets = [pipelines(), pipelines()] as const;
    const machine = new ProductionAxis(
      { gain: 20, pole: 12, coulomb: 4 },
      { kp: 0.9, ki: 2, kd: 0.02, kv: 0.05, ka: 0.004 },
      1_000,
      0.01,
    );
    const prepared = new Map<string, Database.Statement>();
    let rows = 0;
    let ownMs = 0;
    let bareMs = 0;
    for (let second = 0; second < WRITTEN_SECONDS; second++) {
      const block = machine.run(1_764_600_000_000_000 + second * 1e6, 1);
      for (const fleet of fleets) for (const pipeline of fleet) pipeline.push(block);
      statements.length = 0;
      recorder.write(fleets[1], []);
      let from = performance.now();
      writer.write(fleets[0], []);
      const took = performance.now() - from;
      for (const [sql] of statements) if (!prepared.has(sql)) prepared.set(sql, bare.prepare(sql));
      from = performance.now();
      bare.transaction(() => {
        for (const [sql, parameters] of statements) prepared.get(sql)!.run(...parameters);
      })();
      const tookBare = performance.now() - from;
      // The first writes every part of every axis, which happens once in a service's life.
      if (second === 0) continue;
      rows += statements.length;
      ownMs += took;
      bareMs += tookBare;
    }
    for (const database of databases) database.close();
    const perSecond = (ms: number): number => round((1e3 * rows) / ms);
    return [
      {
        name: `checkpoint of ${WRITTEN_AXES} axes: rows a second`,
        value: perSecond(ownMs),
        unit: 'rows/s',
        floor: perSecond(bareMs),
        ratio: round(bareMs / ownMs),
        note: `floor: the same statements and values through better-sqlite3 alone; ${round(rows / (WRITTEN_SECONDS - 1))} rows and ${round(ownMs / (WRITTEN_SECONDS - 1))} ms a checkpoint`,
      },
    ];
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

const TABLES = ['indicator_second', 'indicator_minute', 'indicator_hour'];

/** The tables of a checkpoint as the migrations make them, and the service's own pragmas. */
function open(path: string): Database.Database {
  const database = new Database(path);
  database.pragma('journal_mode = WAL');
  database.pragma('synchronous = NORMAL');
  database.pragma('wal_autocheckpoint = 8192');
  const key = 'PRIMARY KEY ("axisId", "t")) WITHOUT ROWID';
  for (const table of TABLES)
    database.exec(
      `CREATE TABLE "${table}" ("axisId" integer, "t" integer, "samples" integer, "movingSamples" integer,
         "peakMovingError" real, "sumSquaredMovingError" real, "peakStandingError" real, "sumSquaredStandingError" real,
         "saturatedSamples" integer, "peakOutput" real, "sumSquaredOutput" real, "sumSquaredActivity" real,
         "activityCrossings" integer, "coveredSeconds" real, "gaps" integer, ${key}`,
    );
  database.exec(
    `CREATE TABLE "move_record" ("axisId" integer, "t" real, "revision" integer, "distance" real, "duration" real,
       "peakError" real, "rmsError" real, "saturatedPct" real, ${key};
     CREATE TABLE "plant_estimate_row" ("axisId" integer, "t" real, "estimate" text, "chart" text, ${key};
     CREATE TABLE "axis_checkpoint" ("axisId" integer, "part" integer, "state" blob, PRIMARY KEY ("axisId", "part"))
       WITHOUT ROWID;
     CREATE TABLE "gateway" ("id" integer PRIMARY KEY, "epoch" text, "durableSequence" integer, "lastSeenAt" text)`,
  );
  return database;
}

const sourceOf = (database: unknown): DataSource =>
  ({ driver: { databaseConnection: database } }) as unknown as DataSource;

/** What the writer needs of a connection; it writes down what it is asked to run. */
const writingDown = (statements: Statement[]) => ({
  inTransaction: false,
  transaction: (work: () => void) => work,
  prepare: (sql: string) => ({
    run: (...parameters: unknown[]) =>
      // What is handed over may be a view of memory that is written again, or a row that is used again.
      void statements.push([
        sql,
        parameters.map((value) =>
          Buffer.isBuffer(value) ? Buffer.from(value) : Array.isArray(value) ? [...value] : value,
        ),
      ]),
  }),
});

const pipelines = (): AxisPipeline[] =>
  Array.from(
    { length: WRITTEN_AXES },
    (_, k) =>
      new AxisPipeline({
        id: k + 1,
        siteId: 1,
        tag: `B-${k}`,
        sampleTime: 0.001,
        resolution: 0.01,
        loopFrequency: 20,
        baseline: null,
        tolerances: { gainPct: 15, polePct: 25, followingError: 1, saturatedPct: 2 } as never,
        revision: 1,
        inMaintenance: false,
      }),
  );

async function histories(): Promise<BenchRecord[]> {
  const fleet = await makeFleet(AXES);
  try {
    const now = Math.floor(Date.now() / 1000 / 60) * 60;
    const rows = fill(fleet, now);
    const service = await startProcess(fleet.folder);
    try {
      const authorization = `Bearer ${await accessToken(service.url)}`;
      const ask = async (path: string): Promise<number> => {
        const from = performance.now();
        const response = await fetch(`${service.url}/api/v1/${path}`, { headers: { authorization } });
        const body = (await response.json()) as { items: unknown[] };
        if (!response.ok || body.items.length === 0)
          throw new Error(`${path}: ${response.status}, nothing in it`);
        return performance.now() - from;
      };
      const chart = (days: number) => (k: number) =>
        `axes/${fleet.axisIds[(k * 37) % AXES]}/indicators?points=${CHART_POINTS}` +
        `&from=${new Date((now - days * DAY) * 1000).toISOString()}&to=${new Date(now * 1000).toISOString()}`;
      const records: BenchRecord[] = [];
      for (const [what, path] of [
        ['one axis over a day, for a chart', chart(1)],
        ['one axis over a month, for a chart', chart(30)],
        [`one axis over ${DAYS} days, for a chart`, chart(DAYS)],
        [
          `estimates of one axis over ${DAYS} days, for a chart`,
          (k: number) => chart(DAYS)(k).replace('indicators', 'estimates'),
        ],
        [
          'a page of 1000 minutes',
          (k: number) =>
            `axes/${fleet.axisIds[(k * 37) % AXES]}/indicators?limit=1000&from=${new Date((now - DAY) * 1000).toISOString()}`,
        ],
        [`fleet list of ${AXES} axes`, () => 'axes?limit=1000'],
      ] as const) {
        const times: number[] = [];
        const before = (await metrics(service.url))(CPU)!;
        for (let k = 0; k < ASKED; k++) times.push(await ask(path(k)));
        const cpu = (1e3 * ((await metrics(service.url))(CPU)! - before)) / ASKED;
        times.sort((a, b) => a - b);
        records.push({
          name: `history, ${what}: p95`,
          value: round(times[Math.ceil(0.95 * ASKED) - 1]!),
          unit: 'ms',
          floor: 50,
          ratio: round(times[Math.ceil(0.95 * ASKED) - 1]! / 50),
          note: `by HTTP, ${ASKED} requests, median ${round(times[Math.floor(ASKED / 2)]!)}, ${round(cpu)} ms of the service’s CPU each; floor: what is asked of it; ${rows} minutes of ${AXES} axes in the file`,
        });
      }
      return records;
    } finally {
      await service.stop();
    }
  } finally {
    rmSync(fleet.folder, { recursive: true, force: true });
  }
}

/**
 * Writes `DAYS` of minutes, their hours and an estimate an hour for every axis.
 *
 * @returns minutes written
 */
function fill({ folder, axisIds }: BenchFleet, now: number): number {
  const database = new Database(join(folder, 'polewright.sqlite'));
  database.pragma('synchronous = OFF');
  // The service prunes what is older than it keeps.
  database
    .prepare(`UPDATE "retention_setting" SET "keptSeconds" = ? WHERE "kind" = 'minutes'`)
    .run((DAYS + 1) * DAY);
  const rollup = (table: string, unit: number, from: number) =>
    database.prepare(
      `WITH RECURSIVE "stretch" ("t") AS (SELECT ${from} UNION ALL SELECT "t" + ${unit} FROM "stretch" WHERE "t" + ${unit} < ${now})
       INSERT OR IGNORE INTO "${table}" ("axisId", "t", "samples", "movingSamples", "peakMovingError", "sumSquaredMovingError",
         "peakStandingError", "sumSquaredStandingError", "saturatedSamples", "peakOutput", "sumSquaredOutput",
         "sumSquaredActivity", "activityCrossings", "coveredSeconds", "gaps")
       SELECT ?, "t", ${unit} * 1000, ${unit} * 600, 0.2 + ("t" % 977) / 9770.0, ${unit} * 3.7, 0.01 + ("t" % 89) / 8900.0,
         ${unit} * 0.04, "t" % 53, 40 + ("t" % 613) / 20.0, ${unit} * 81234.5, ${unit} * 91.25, ${unit} * 7, ${unit}, 0
       FROM "stretch"`,
    );
  const first = now - DAYS * DAY;
  const minutes = rollup('indicator_minute', 60, first);
  const hours = rollup('indicator_hour', 3_600, Math.floor(first / 3_600) * 3_600);
  const made = database
    .prepare(`SELECT "estimate" FROM "plant_estimate_row" LIMIT 1`)
    .pluck()
    .get() as string;
  const estimates = database.prepare(
    `WITH RECURSIVE "stretch" ("t") AS (SELECT ${first} UNION ALL SELECT "t" + 3600 FROM "stretch" WHERE "t" + 3600 < ${now})
     INSERT OR IGNORE INTO "plant_estimate_row" ("axisId", "t", "estimate", "chart") SELECT ?, "t" + 0.5, ?, NULL FROM "stretch"`,
  );
  let rows = 0;
  for (const axisId of axisIds)
    database.transaction(() => {
      rows += minutes.run(axisId).changes;
      hours.run(axisId);
      estimates.run(axisId, made);
    })();
  database.pragma('wal_checkpoint(TRUNCATE)');
  database.close();
  return rows;
}
