import Database from 'better-sqlite3';
import { mkdirSync, rmSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { DataSource } from 'typeorm';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { CAPTURE_FILES, workStorage, type TableSize } from '../../src/storage/work-storage.js';
import { temporaryFolder } from '../support/start-service.js';

let folder: string;
let path: string;
let dataSource: DataSource;
let sizes: TableSize[];

beforeAll(async () => {
  folder = temporaryFolder();
  path = join(folder, 'polewright.sqlite');
  dataSource = await new DataSource(dataSourceOptions(path)).initialize();
  const { databaseConnection } = dataSource.driver as unknown as { databaseConnection: Database.Database };
  databaseConnection.exec(`
    INSERT INTO "site" ("name", "timeZone") VALUES ('Tile Hall', 'Europe/London');
    INSERT INTO "machine" ("siteId", "name") VALUES (1, 'Cutter');
    WITH RECURSIVE k(n) AS (SELECT 1 UNION ALL SELECT n + 1 FROM k WHERE n < 2)
    INSERT INTO "axis" ("siteId", "machineId", "tag", "name", "actuator", "resolution", "sampleTime", "travel", "move",
        "tolerances", "structure", "pattern", "feedForward")
      SELECT 1, 1, 'TC-0' || n, 'feed', 'electric', 0.01, 0.001, '{}', '{}', '{}', 'pid', '{}', 0 FROM k;
    WITH RECURSIVE k(n) AS (SELECT 1 UNION ALL SELECT n + 1 FROM k WHERE n < 3000)
    INSERT INTO "move_record" SELECT 1 + n % 2, 1000.5 + n, 1, 1, 1, 1, 1, 1 FROM k;
    WITH RECURSIVE k(n) AS (SELECT 1 UNION ALL SELECT n + 1 FROM k WHERE n < 2000)
    INSERT INTO "alert" ("siteId", "axisId", "rule", "priority", "state", "raisedAt", "value", "threshold", "message", "action")
      SELECT 1, 1, 'drift', 'low', 'normal', '2026-11-30', 1, 1, 'drifts', 'look' FROM k;`);
  mkdirSync(join(folder, 'captures', 'incoming'), { recursive: true });
  writeFileSync(join(folder, 'captures', '7.trace'), Buffer.alloc(12_345));
  writeFileSync(join(folder, 'captures', '8.samples'), Buffer.alloc(55));
  sizes = (
    workStorage({ measure: { database: path, captures: join(folder, 'captures') } }) as { sizes: TableSize[] }
  ).sizes;
});
afterAll(async () => {
  await dataSource?.destroy();
  rmSync(folder, { recursive: true, force: true });
});

const of = (name: string): TableSize | undefined => sizes.find((size) => size.name === name);

test('every table has as many rows as it has, with row ids and without', async () => {
  for (const { tableName } of dataSource.entityMetadatas) {
    const [counted] = (await dataSource.query(`SELECT count(*) AS "rows" FROM "${tableName}"`)) as {
      rows: number;
    }[];
    expect({ tableName, rows: of(tableName)?.rows }).toEqual({ tableName, rows: counted!.rows });
  }
  expect(of('move_record')!.rows).toBe(3_000);
  expect(of('alert')!.rows).toBe(2_000);
});

test('the bytes of all tables and their indices are those of the file, but for its first page and free ones', async () => {
  const [{ bytes } = { bytes: 0 }] = (await dataSource.query(
    `SELECT (page_count - freelist_count) * page_size AS "bytes"
     FROM pragma_page_count, pragma_freelist_count, pragma_page_size`,
  )) as { bytes: number }[];
  const inTables = sizes
    .filter(({ name }) => name !== CAPTURE_FILES)
    .reduce((sum, size) => sum + size.bytes, 0);
  expect(inTables).toBeLessThan(bytes);
  expect(bytes - inTables).toBeLessThan(20 * 4_096);
  expect(of('alert')!.bytes).toBeGreaterThan(2_000 * 60);
});

test('the oldest row is that of all axes; tables without an end have none', () => {
  expect(of('move_record')!.oldest).toBe(1_001.5);
  expect(of('indicator_minute')!.oldest).toBeNull();
  expect(of('alert')!.oldest).toBeNull();
});

test('captures are counted as files, what is still coming in is not', () => {
  expect(of(CAPTURE_FILES)).toEqual({ name: CAPTURE_FILES, rows: 2, bytes: 12_400, oldest: null });
});

test('a working database is found whole, a file of another kind is not', () => {
  expect(workStorage({ check: path })).toEqual({ fault: null });
  expect(workStorage({ check: join(folder, 'captures', '7.trace') })).toMatchObject({
    fault: expect.stringMatching(/cannot be read/) as string,
  });
});
