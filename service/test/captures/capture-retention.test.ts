import type { ConfigService } from '@nestjs/config';
import { existsSync, rmSync, writeFileSync } from 'node:fs';
import { DataSource } from 'typeorm';
import { afterEach, beforeEach, expect, test } from 'vitest';
import { CaptureFiles } from '../../src/captures/capture-files.js';
import { CaptureRetention } from '../../src/captures/capture-retention.service.js';
import { Capture, newCapture } from '../../src/captures/capture.entity.js';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { Transactions } from '../../src/database/transactions.js';
import type { Settings } from '../../src/settings.js';
import type { RetentionSettings } from '../../src/storage/retention-settings.service.js';
import { temporaryFolder } from '../support/start-service.js';

const NOW = new Date('2026-12-01T12:00:00Z');
const DAY = 86_400_000;
const daysAgo = (days: number): Date => new Date(NOW.getTime() - days * DAY);

let folder: string;
let dataSource: DataSource;
let files: CaptureFiles;
let retention: CaptureRetention;

beforeEach(async () => {
  folder = temporaryFolder();
  dataSource = await new DataSource(dataSourceOptions(':memory:')).initialize();
  for (const statement of [
    `INSERT INTO "site" ("name", "timeZone") VALUES ('Tile Hall', 'Europe/London')`,
    `INSERT INTO "machine" ("siteId", "name") VALUES (1, 'Cutter')`,
    `INSERT INTO "axis" ("siteId", "machineId", "tag", "name", "actuator", "resolution", "sampleTime", "travel", "move",
       "tolerances", "structure", "pattern", "feedForward")
     VALUES (1, 1, 'TC-01', 'feed', 'electric', 0.01, 0.001, '{}', '{}', '{}', 'pid', '{}', 0)`,
  ])
    await dataSource.query(statement);
  files = new CaptureFiles({ get: () => folder } as unknown as ConfigService<Settings, true>);
  retention = new CaptureRetention(
    dataSource,
    new Transactions(dataSource),
    { get: () => ({ alertCaptures: 60 * 86_400 }) } as unknown as RetentionSettings,
    files,
  );
});
afterEach(async () => {
  await dataSource.destroy();
  rmSync(folder, { recursive: true, force: true });
});

const alert = async (id: number, state: string, returnedAt: Date | null): Promise<void> => {
  await dataSource.query(
    `INSERT INTO "alert" ("id", "siteId", "axisId", "rule", "priority", "state", "raisedAt", "returnedAt", "value",
       "threshold", "message", "action") VALUES (?, 1, 1, ?, 'low', ?, '2026-01-01 00:00:00.000', ?, 1, 1, 'm', 'a')`,
    [id, `rule ${id}`, state, returnedAt && returnedAt.toISOString().replace('T', ' ').replace('Z', '')],
  );
};
const capture = async (differs: Partial<Capture>): Promise<number> => {
  const { id } = await dataSource.getRepository(Capture).save({
    ...newCapture({
      siteId: 1,
      axisId: 1,
      source: 'alert',
      alertId: null,
      createdById: null,
      fileName: 'TC-01',
      mapping: null,
    }),
    createdAt: daysAgo(100),
    status: 'done' as const,
    recorded: true,
    ...differs,
  });
  writeFileSync(files.trace(id), 'trace');
  return id;
};
const left = async (): Promise<number[]> =>
  (await dataSource.getRepository(Capture).find({ order: { id: 'ASC' } })).map(({ id }) => id);

test('a capture goes when the end of its alert is as long ago as captures are kept, with its files', async () => {
  await alert(1, 'normal', daysAgo(61));
  await alert(2, 'normal', daysAgo(59));
  const [old, young] = [await capture({ alertId: 1 }), await capture({ alertId: 2 })];
  await retention.look(NOW);
  expect(await left()).toEqual([young]);
  expect(existsSync(files.trace(old))).toBe(false);
  expect(existsSync(files.trace(young))).toBe(true);
  await retention.look(new Date(NOW.getTime() + 2 * DAY));
  expect(await left()).toEqual([]);
});

test.each(['unacknowledged', 'acknowledged', 'returned-unacknowledged', 'shelved', 'suppressed'])(
  'while its alert is %s it stays, however old',
  async (state) => {
    await alert(1, state, state === 'returned-unacknowledged' ? daysAgo(90) : null);
    const id = await capture({ alertId: 1, createdAt: daysAgo(900) });
    await retention.look(NOW);
    expect(await left()).toEqual([id]);
  },
);

test('without its alert its own age counts; what a person recorded or what is being worked out stays', async () => {
  await capture({ alertId: 99, createdAt: daysAgo(61) });
  const stay = [
    await capture({ alertId: 99, createdAt: daysAgo(59) }),
    await capture({ source: 'upload' }),
    await capture({ source: 'on demand' }),
    await capture({ alertId: 99, status: 'running' }),
    await capture({ alertId: 99, status: 'queued' }),
  ];
  await retention.look(NOW);
  expect(await left()).toEqual(stay);
});

test('of an axis the newest twenty around alerts are kept', async () => {
  const ids = [];
  for (let k = 0; k < 23; k++) ids.push(await capture({ createdAt: NOW }));
  const own = await capture({ source: 'on demand' });
  await retention.oneMore(1);
  expect(await left()).toEqual([...ids.slice(3), own]);
});
