import type { ConfigService } from '@nestjs/config';
import Database from 'better-sqlite3';
import { existsSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { DataSource } from 'typeorm';
import { afterEach, beforeEach, expect, test } from 'vitest';
import { BACKUPS_KEPT, BackupService } from '../../src/database/backup.service.js';
import { damageOf } from '../../src/database/damage.js';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { restore } from '../../src/database/restore.js';
import type { Settings } from '../../src/settings.js';
import { temporaryFolder } from '../support/start-service.js';

const DAY = 86_400_000;
const MONDAY = new Date('2026-11-30T06:00:00Z');

let folder: string;
let path: string;
let dataSource: DataSource;
let backups: BackupService;
let said: string[];

beforeEach(async () => {
  folder = temporaryFolder();
  path = join(folder, 'polewright.sqlite');
  dataSource = await new DataSource(dataSourceOptions(path)).initialize();
  backups = new BackupService(dataSource, { get: () => folder } as unknown as ConfigService<Settings, true>);
  said = [];
  await addSite('one');
});
afterEach(async () => {
  if (dataSource.isInitialized) await dataSource.destroy();
  rmSync(folder, { recursive: true, force: true });
});

const addSite = (name: string): Promise<unknown> =>
  dataSource.query(`INSERT INTO "site" ("name", "timeZone") VALUES (?, 'Europe/London')`, [name]);
const sites = (file: string): unknown[] => {
  const database = new Database(file, { readonly: true });
  try {
    return database.prepare('SELECT "name" FROM "site" ORDER BY "id"').pluck().all();
  } finally {
    database.close();
  }
};
const tryRestore = (backup: string): number => restore(backup, path, (line) => said.push(line), MONDAY);

test('a backup is made once a day beside the working database, and the newest seven are kept', async () => {
  for (let day = 0; day < BACKUPS_KEPT + 2; day++) {
    await backups.whenDue(new Date(MONDAY.getTime() + day * DAY));
    await backups.whenDue(new Date(MONDAY.getTime() + day * DAY + DAY / 2));
    backups.prune();
  }
  const made = backups.list();
  expect(made.map(({ at }) => (at.getTime() - MONDAY.getTime()) / DAY)).toEqual([8, 7, 6, 5, 4, 3, 2]);
  expect(readdirSync(join(folder, 'backups'))).toHaveLength(BACKUPS_KEPT);
});

test('several backups on one day leave the former days theirs, and none goes before it is asked for', async () => {
  for (const at of [0, DAY, DAY + 3_600_000, DAY + 7_200_000])
    await backups.make(new Date(MONDAY.getTime() + at));
  expect(backups.list()).toHaveLength(4);
  backups.prune();
  expect(backups.list().map(({ at }) => at.getTime() - MONDAY.getTime())).toEqual([DAY + 7_200_000, 0]);
});

test('a backup that does not fit is refused before anything is written, and says what it needs', async () => {
  Object.defineProperty(backups, 'needed', { configurable: true, get: () => 2 ** 60 });
  await backups.whenDue(MONDAY);
  expect(backups.failure?.why).toMatch(/^it needs 1099511627776 MiB of disk and \d+ MiB are free$/);
  expect(readdirSync(join(folder, 'backups'))).toEqual([]);
  Reflect.deleteProperty(backups, 'needed');
  expect(await backups.make(MONDAY)).not.toBeNull();
  expect(backups.failure).toBeNull();
  expect(backups.list()).toMatchObject([{ name: 'polewright-2026-11-30T06-00-00.sqlite', at: MONDAY }]);
});

test('what is written while a backup is made does not spoil it', async () => {
  const making = backups.make(MONDAY);
  expect(await backups.make(MONDAY)).toBeNull();
  await addSite('two');
  const file = (await making)!;
  expect(sites(file).slice(0, 1)).toEqual(['one']);
  const database = new Database(file, { readonly: true });
  expect(database.pragma('integrity_check', { simple: true })).toBe('ok');
  database.close();
  // Whoever reads it leaves nothing beside it.
  expect(readdirSync(join(folder, 'backups'))).toEqual(['polewright-2026-11-30T06-00-00.sqlite']);
});

test('restored, the data are those of the backup, the service opens them, and the former file is kept', async () => {
  const file = (await backups.make(MONDAY))!;
  await addSite('two');
  expect(tryRestore(file)).toBe(1);
  expect(said.join()).toMatch(/in use/);
  await dataSource.destroy();
  expect(sites(path)).toEqual(['one', 'two']);
  said = [];
  expect(tryRestore(file)).toBe(0);
  expect(sites(path)).toEqual(['one']);
  expect(sites(`${path}.before-2026-11-30T06-00-00`)).toEqual(['one', 'two']);
  await dataSource.initialize();
  await addSite('three');
  await dataSource.destroy();
  expect(sites(path)).toEqual(['one', 'three']);
  expect(sites(file)).toEqual(['one']);
});

test('a damaged database is moved aside as it is, and the backup put in its place', async () => {
  const file = (await backups.make(MONDAY))!;
  await dataSource.destroy();
  const damaged = Buffer.alloc(9_000, 'damaged');
  writeFileSync(path, damaged);
  expect(tryRestore(file)).toBe(0);
  expect(sites(path)).toEqual(['one']);
  expect(readFileSync(`${path}.before-2026-11-30T06-00-00`)).toEqual(damaged);
});

test.each([
  ['no file', () => undefined, /no such file/],
  [
    'no database',
    (at: string) => writeFileSync(at, 'not a database, though long enough to be read as one'),
    /cannot be read/,
  ],
  [
    'somebody else’s database',
    (at: string) => {
      const other = new Database(at);
      other.exec('CREATE TABLE "axis" ("id" integer)');
      other.close();
    },
    /not of this service/,
  ],
])('%s is not restored and nothing changes', async (_, make, words) => {
  await dataSource.destroy();
  const file = join(folder, 'other.sqlite');
  make(file);
  expect(tryRestore(file)).toBe(1);
  expect(said.join()).toMatch(words);
  expect(sites(path)).toEqual(['one']);
  expect(existsSync(`${path}.before-2026-11-30T06-00-00`)).toBe(false);
});

test('a backup with a damaged page is refused', async () => {
  const file = (await backups.make(MONDAY))!;
  const bytes = readFileSync(file);
  bytes.fill(0xff, 3 * 4096, 9 * 4096);
  writeFileSync(file, bytes);
  await dataSource.destroy();
  expect(tryRestore(file)).toBe(1);
  expect(sites(path)).toEqual(['one']);
});

test('a damaged database is named with the newest backup, and not touched', async () => {
  expect(damageOf(path, folder)).toBeNull();
  const file = (await backups.make(MONDAY))!;
  await dataSource.destroy();
  const damaged = Buffer.alloc(9_000, 'damaged');
  writeFileSync(path, damaged);
  expect(damageOf(path, folder)).toContain(`npm run restore -- ${file}`);
  rmSync(file);
  expect(damageOf(path, folder)).toContain('There is no backup');
  expect(readFileSync(path)).toEqual(damaged);
  rmSync(path);
  expect(damageOf(path, folder)).toBeNull();
  expect(existsSync(path)).toBe(false);
});
