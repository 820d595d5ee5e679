import Database from 'better-sqlite3';
import { ConfigService } from '@nestjs/config';
import { readdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { RetentionSetting } from '../../src/storage/retention-setting.entity.js';
import { RetentionSettings } from '../../src/storage/retention-settings.service.js';
import type { StorageDto } from '../../src/storage/dto/storage.dto.js';
import { StorageMeasurement } from '../../src/storage/storage-measurement.entity.js';
import { StorageService } from '../../src/storage/storage.service.js';
import { startService, until, type Service } from '../support/start-service.js';

const DAY = 86_400;

let service: Service;
let folder: string;
beforeAll(async () => {
  service = await startService();
  folder = service.app.get(ConfigService).get<string>('DATA_DIR')!;
});
afterAll(() => service?.close());

const report = async (): Promise<StorageDto> =>
  (await (await service.as('admin')).get('/api/v1/storage').expect(200)).body as StorageDto;
const kept = async (): Promise<Record<string, number>> =>
  Object.fromEntries((await report()).retention.map(({ kind, keptSeconds }) => [kind, keptSeconds]));

test.each(['viewer', 'technician', 'engineer', 'approver'])('%ss have no part in it', async (who) => {
  const caller = await service.as(who);
  await caller.get('/api/v1/storage').expect(403);
  await caller
    .patch('/api/v1/storage/retention')
    .send({ minutes: 30 * DAY })
    .expect(403);
  await caller.post('/api/v1/storage/backups').expect(403);
  await caller.post('/api/v1/storage/measurements').expect(403);
  await caller.post('/api/v1/storage/checks').send({ subject: 'database' }).expect(403);
});

test('it starts with the defaults as rows of a table', async () => {
  expect(await kept()).toEqual({
    seconds: 7_200,
    minutes: 60 * DAY,
    hours: 3 * 365 * DAY,
    estimates: 3 * 365 * DAY,
    alertCaptures: 60 * DAY,
  });
  expect(await service.dataSource.getRepository(RetentionSetting).count()).toBe(5);
});

test.each([
  [{ seconds: 60 }, 'seconds', 'must be from 1 h to 7 days'],
  [{ minutes: 3_000 * DAY }, 'minutes', 'must be from 7 days to 2 years'],
  [{ hours: 31 * DAY }, 'hours', 'must not be kept shorter than minutes'],
  [{ estimates: null }, 'estimates', 'estimates must be an integer number'],
  [{ seconds: 7200.5 }, 'seconds', 'seconds must be an integer number'],
  [{ minutes: '60' }, 'minutes', 'minutes must be an integer number'],
  [{ moves: 60 }, 'moves', 'property moves should not exist'],
  [{}, '', 'names nothing to change'],
])('%j is refused by name and nothing changes', async (body, path, message) => {
  const before = await kept();
  const { body: problem } = await (
    await service.as('admin')
  )
    .patch('/api/v1/storage/retention')
    .send(body)
    .expect(400);
  expect((problem as { errors: unknown[] }).errors).toEqual([{ path, message }]);
  expect(await kept()).toEqual(before);
});

test('a change counts at once, outlives a restart, and is in the record for administrators', async () => {
  const admin = await service.as('admin');
  await admin
    .patch('/api/v1/storage/retention')
    .send({ seconds: 4 * 3_600, minutes: 90 * DAY })
    .expect(200);
  expect(await kept()).toMatchObject({ seconds: 4 * 3_600, minutes: 90 * DAY, alertCaptures: 60 * DAY });
  const again = new RetentionSettings(service.dataSource, null as never, null as never);
  await again.onModuleInit();
  expect(again.get()).toEqual(await kept());
  const { body } = await admin.get('/api/v1/audit?subjectType=storage').expect(200);
  expect((body as { items: object[] }).items[0]).toMatchObject({
    action: 'storage.retention-changed',
    before: { minutes: 60 * DAY },
    after: { minutes: 90 * DAY, seconds: 4 * 3_600 },
  });
  const { body: engineers } = await (
    await service.as('engineer')
  )
    .get('/api/v1/audit?subjectType=storage')
    .expect(200);
  expect((engineers as { items: object[] }).items).toEqual([]);
});

test('who administers one of two sites sees the page and may not shorten what the other keeps', async () => {
  await service.addPerson('halfadmin', [{ siteId: service.siteIds[0], role: 'administrator' }]);
  const caller = await service.as('halfadmin');
  const { body } = await caller.get('/api/v1/storage').expect(200);
  expect((body as StorageDto).mayChangeRetention).toBe(false);
  expect((await report()).mayChangeRetention).toBe(true);
  await caller
    .patch('/api/v1/storage/retention')
    .send({ minutes: 30 * DAY })
    .expect(403);
});

test('measured, every table is there with its rows; a forecast waits for a day of measurements', async () => {
  expect((await report()).forecast).toEqual({
    outcome: 'not-enough-history',
    since: null,
    bytesPerDay: null,
    fullAt: null,
    fullInDays: null,
  });
  await (await service.as('admin')).post('/api/v1/storage/measurements').expect(202);
  await until('the thread to answer', async () => (await report()).measuredAt !== null);
  const { tables, forecast, databaseBytes, freeBytes, totalBytes } = await report();
  expect(tables.find(({ name }) => name === 'axis')!.rows).toBe(
    ((await service.dataSource.query('SELECT count(*) AS "n" FROM "axis"')) as { n: number }[])[0]!.n,
  );
  expect(tables.map(({ bytes }) => bytes)).toEqual(tables.map(({ bytes }) => bytes).sort((a, b) => b - a));
  expect(forecast.outcome).toBe('not-enough-history');
  expect(databaseBytes).toBeGreaterThan(tables[0]!.bytes);
  expect(freeBytes).toBeLessThanOrEqual(totalBytes);

  // As if two days ago there had been 1 000 rows of hours fewer.
  const repository = service.dataSource.getRepository(StorageMeasurement);
  await repository.insert(
    (await repository.find()).map((row) => ({
      ...row,
      t: row.t - 2 * DAY,
      rows: row.name === 'indicator_hour' ? row.rows - 1_000 : row.rows,
    })),
  );
  const later = await report();
  const hours = later.tables.find(({ name }) => name === 'indicator_hour')!;
  expect(hours.rowsPerDay).toBeCloseTo(500, 6);
  expect(later.forecast.outcome).not.toBe('not-enough-history');
  expect(later.forecast.bytesPerDay).toBeCloseTo((500 * hours.bytes) / hours.rows, 3);
});

test('a backup on demand is made, recorded, found whole, and listed; a spoilt one is found out', async () => {
  const admin = await service.as('admin');
  await admin.post('/api/v1/storage/backups').expect(202);
  await until('the thread to answer', async () => (await report()).backups.items[0]?.integrity);
  const [backup] = (await report()).backups.items;
  expect(backup).toMatchObject({ integrity: { fault: null } });
  const path = join(folder, 'backups', backup!.name);
  expect(readFileSync(path).byteLength).toBe(backup!.bytes);
  const opened = new Database(path, { readonly: true });
  expect(opened.prepare('SELECT count(*) FROM "axis"').pluck().get()).toBeGreaterThan(0);
  opened.close();
  const { body } = await admin.get('/api/v1/audit?subjectType=storage').expect(200);
  expect((body as { items: object[] }).items[0]).toMatchObject({ action: 'storage.backup-begun' });

  const bytes = readFileSync(path);
  bytes.fill(0xff, 3 * 4096, 9 * 4096);
  writeFileSync(path, bytes);
  await admin.post('/api/v1/storage/checks').send({ subject: backup!.name }).expect(202);
  await until(
    'the thread to answer',
    async () => (await report()).backups.items[0]!.integrity!.fault !== null,
  );
  expect((await report()).checking).toEqual([]);

  // With a spoilt newest backup none is taken away, however many there are.
  for (let day = 1; day <= 9; day++)
    writeFileSync(join(folder, 'backups', `polewright-2026-01-0${day}T00-00-00.sqlite`), 'x');
  for (let k = 0; k < 10; k++) await service.app.get(StorageService).look();
  expect(readdirSync(join(folder, 'backups'))).toHaveLength(10);
  expect((await report()).backups.items.every(({ integrity }) => integrity!.fault !== null)).toBe(true);
});

test('the database is checked while it works; what is no backup is refused by name', async () => {
  const admin = await service.as('admin');
  await admin.post('/api/v1/storage/checks').send({ subject: 'database' }).expect(202);
  await until('the thread to answer', async () => (await report()).integrity !== null);
  expect((await report()).integrity).toMatchObject({ fault: null });
  await admin.post('/api/v1/storage/checks').send({ subject: '../polewright.sqlite' }).expect(400);
  await admin.post('/api/v1/storage/checks').send({}).expect(400);
  await admin
    .post('/api/v1/storage/checks')
    .send({ subject: 'polewright-2020-01-01T00-00-00.sqlite' })
    .expect(404);
});
