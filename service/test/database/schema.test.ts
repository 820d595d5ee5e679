import Database from 'better-sqlite3';
import { rmSync } from 'node:fs';
import { join } from 'node:path';
import { DataSource } from 'typeorm';
import { afterEach, beforeEach, expect, test } from 'vitest';
import { dataSourceOptions, ENTITIES } from '../../src/database/data-source.js';
import { Axis } from '../../src/fleet/axis.entity.js';
import { Site } from '../../src/fleet/site.entity.js';
import { temporaryFolder } from '../support/start-service.js';

let folder: string;
let path: string;
let dataSource: DataSource;

beforeEach(async () => {
  folder = temporaryFolder();
  path = join(folder, 'schema.sqlite');
  dataSource = await new DataSource(dataSourceOptions(path)).initialize();
});
afterEach(async () => {
  if (dataSource.isInitialized) await dataSource.destroy();
  rmSync(folder, { recursive: true, force: true });
});

test('the migrations make exactly the schema that the entities describe', async () => {
  expect(dataSourceOptions(path)).toMatchObject({ synchronize: false, migrationsRun: true });
  expect(dataSource.entityMetadatas).toHaveLength(ENTITIES.length);
  const { upQueries } = await dataSource.driver.createSchemaBuilder().log();
  expect(upQueries.map(({ query }) => query)).toEqual([]);
  // The comparison sees a difference where there is one.
  await dataSource.query('ALTER TABLE "axis" DROP COLUMN "maintenanceBy"');
  expect((await dataSource.driver.createSchemaBuilder().log()).upQueries.length).toBeGreaterThan(0);
});

test('every migration can be taken back, to an empty database', async () => {
  for (let k = 0; k < dataSource.migrations.length; k++) await dataSource.undoLastMigration();
  const tables = (await dataSource.query(
    `SELECT "name" FROM "sqlite_master" WHERE "type" IN ('table', 'index') AND "name" NOT LIKE 'sqlite_%'`,
  )) as { name: string }[];
  expect(tables).toEqual([{ name: 'migrations' }]);
  await dataSource.runMigrations();
  expect(await dataSource.getRepository(Site).count()).toBe(0);
});

test('a second start finds nothing to do and everything as it was', async () => {
  await dataSource.getRepository(Site).save({ name: 'Tile Hall', timeZone: 'Europe/London' });
  await dataSource.destroy();
  dataSource = await new DataSource(dataSourceOptions(path)).initialize();
  expect(await dataSource.runMigrations()).toEqual([]);
  expect(await dataSource.getRepository(Site).find()).toMatchObject([{ name: 'Tile Hall' }]);
});

test('the file keeps a write-ahead log, and what refers to nothing is refused', async () => {
  const pragma = async (name: string): Promise<unknown> =>
    Object.values(((await dataSource.query(`PRAGMA ${name}`)) as [object])[0])[0];
  expect(await pragma('journal_mode')).toBe('wal');
  expect(await pragma('foreign_keys')).toBe(1);
  expect(await pragma('busy_timeout')).toBe(50);
  await expect(
    dataSource.query(`INSERT INTO "machine" ("siteId", "name") VALUES (99, 'Press of no site')`),
  ).rejects.toThrow(/FOREIGN KEY/);
  expect(await pragma('integrity_check')).toBe('ok');
  // Also read by SQLite itself, without the service's connection.
  const other = new Database(path, { readonly: true });
  expect(other.pragma('foreign_key_check')).toEqual([]);
  other.close();
});

test('a site has a tag once, and one open proposal or alert of a rule per axis', () => {
  const unique = dataSource
    .getMetadata(Axis)
    .uniques.map(({ columns }) => columns.map(({ propertyName }) => propertyName).sort());
  expect(unique).toContainEqual(['siteId', 'tag']);
  const partial = (entity: string): (string | undefined)[] =>
    dataSource
      .getMetadata(entity)
      .indices.filter(({ isUnique }) => isUnique)
      .map(({ where }) => where);
  expect(partial('Proposal')).toEqual([expect.stringContaining('on trial')]);
  expect(partial('Alert')).toEqual([expect.stringContaining('normal')]);
});
