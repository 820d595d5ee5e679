import Database from 'better-sqlite3';
import type { DataSource } from 'typeorm';
import { afterAll, beforeAll, beforeEach, expect, test } from 'vitest';
import { KIND_OF, RETENTION, RETENTION_KINDS, type Retention } from '../../src/storage/retention.js';
import type { RetentionSettings } from '../../src/storage/retention-settings.service.js';
import { RetentionService } from '../../src/storage/retention.service.js';

const NOW = 1_764_600_000;
const HOUR = 3_600;

let database: Database.Database;
let retention: RetentionService;
let kept: Retention;

beforeAll(() => {
  database = new Database(':memory:');
  database.exec(`CREATE TABLE "axis" ("id" integer PRIMARY KEY)`);
  for (const table of Object.keys(KIND_OF))
    database.exec(
      `CREATE TABLE "${table}" ("axisId" integer, "t" real, PRIMARY KEY ("axisId", "t")) WITHOUT ROWID`,
    );
  database.exec(`INSERT INTO "axis" VALUES (3), (9)`);
});
afterAll(() => database.close());

beforeEach(() => {
  for (const table of Object.keys(KIND_OF)) database.exec(`DELETE FROM "${table}"`);
  kept = Object.fromEntries(RETENTION_KINDS.map((kind) => [kind, RETENTION[kind].default])) as Retention;
  retention = new RetentionService(
    { driver: { databaseConnection: database } } as unknown as DataSource,
    { get: () => kept } as unknown as RetentionSettings,
  );
});

const put = (table: string, axisId: number, times: number[]): void => {
  const insert = database.prepare(`INSERT INTO "${table}" VALUES (?, ?)`);
  for (const t of times) insert.run(axisId, t);
};
const left = (table: string, axisId: number): number[] =>
  database
    .prepare(`SELECT "t" FROM "${table}" WHERE "axisId" = ? ORDER BY "t"`)
    .pluck()
    .all(axisId) as number[];
const steps = (count: number, now = NOW): void => {
  for (let k = 0; k < count; k++) retention.step(now);
};

test.each(Object.entries(KIND_OF))(
  '%s: rows go when they are older than %s are kept, on every axis',
  (table, kind) => {
    const kept = RETENTION[kind].default;
    // The last of its hour, so that thinning has no part in it.
    const old = [NOW - kept - 2 * HOUR, NOW - kept - 1];
    const young = [NOW - kept, NOW - kept + HOUR, NOW - 1];
    for (const axisId of [3, 9]) put(table, axisId, [...old, ...young]);
    steps(3);
    for (const axisId of [3, 9]) expect(left(table, axisId)).toEqual(young);
  },
);

test('a backlog goes in steps of 500 rows, the oldest first', () => {
  put(
    'indicator_second',
    3,
    Array.from({ length: 1_200 }, (_, k) => NOW - 50_000 + k),
  );
  steps(1);
  expect(left('indicator_second', 3)).toHaveLength(700);
  expect(left('indicator_second', 3)[0]).toBe(NOW - 50_000 + 500);
  steps(6); // every third step finds no further axis and starts again
  expect(left('indicator_second', 3)).toEqual([]);
});

test('of estimates older than a day the last of each hour stays', () => {
  const day = Math.floor((NOW - 24 * HOUR) / HOUR) * HOUR;
  const old = [-7_200, -7_199.5, -3_700, -3_600, -1_800.25, -0.5].map((dt) => day + dt);
  // The finer thinning begins a day back, within this hour; the rest of the hour waits for the coarser.
  const young = [0, 119.5, 120, 3_600, 3_721].map((dt) => day + dt);
  for (const axisId of [3, 9]) put('plant_estimate_row', axisId, [...old, ...young]);
  // Three years in steps of ten days, two axes and a turn.
  steps(3 * 112);
  for (const axisId of [3, 9])
    expect(left('plant_estimate_row', axisId)).toEqual([day - 3_700, day - 0.5, ...young]);
  // An hour later the next hour is thinned too.
  steps(3, NOW + HOUR);
  expect(left('plant_estimate_row', 3)).toEqual([
    day - 3_700,
    day - 0.5,
    day + 120,
    day + 3_600,
    day + 3_721,
  ]);
});

test('of estimates older than two hours the last of each two minutes stays, of younger ones all', () => {
  const edge = Math.floor((NOW - 2 * HOUR) / 120) * 120;
  // One every five seconds, from an hour before the edge to half an hour after it.
  const times = Array.from({ length: 1_080 }, (_, k) => edge - HOUR + 5 * k + 0.25);
  put('plant_estimate_row', 3, times);
  steps(12);
  const whole = times.filter((t) => t >= edge);
  const lastOfTwoMinutes = times.filter((t) => t < edge && (t + 5) % 120 < 5);
  expect(lastOfTwoMinutes).toHaveLength(30);
  expect(left('plant_estimate_row', 3)).toEqual([...lastOfTwoMinutes, ...whole]);
  steps(3, NOW + 120);
  expect(left('plant_estimate_row', 3)).toHaveLength(30 + whole.length - 23);
});

test('inside somebody else’s transaction nothing is deleted', () => {
  put('indicator_second', 3, [1]);
  database.exec('BEGIN');
  steps(3);
  database.exec('COMMIT');
  expect(left('indicator_second', 3)).toEqual([1]);
  steps(3);
  expect(left('indicator_second', 3)).toEqual([]);
});

test('a retention that is set shorter counts from the next step on', () => {
  put('indicator_minute', 3, [NOW - 9 * 24 * HOUR, NOW - 7 * 24 * HOUR, NOW - HOUR]);
  steps(3);
  expect(left('indicator_minute', 3)).toHaveLength(3);
  kept.minutes = 8 * 24 * HOUR;
  steps(3);
  expect(left('indicator_minute', 3)).toEqual([NOW - 7 * 24 * HOUR, NOW - HOUR]);
});
