import { rmSync } from 'node:fs';
import { join } from 'node:path';
import { DataSource } from 'typeorm';
import { afterAll, expect, test } from 'vitest';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { CheckpointParts1764635000100 } from '../../src/database/migrations/1764635000100-checkpoint-parts.js';
import { temporaryFolder } from '../support/start-service.js';

const folder = temporaryFolder();
afterAll(() => rmSync(folder, { recursive: true, force: true }));

test('checkpoints saved whole are cut into parts and put together again, to the byte', async () => {
  const dataSource = await new DataSource(dataSourceOptions(join(folder, 'parts.sqlite'))).initialize();
  const runner = dataSource.createQueryRunner();
  const migration = new CheckpointParts1764635000100();
  await migration.down(runner);
  const header = Buffer.from('{"chart":null,"decisions":null,"estimate":null}');
  const length = Buffer.alloc(4);
  length.writeUInt32LE(header.byteLength);
  const arrays = Buffer.from(Float64Array.from({ length: 311 }, (_, k) => k / 7).buffer);
  const whole = Buffer.concat([length, header, arrays]);
  for (const axisId of [3, 8])
    await runner.query(`INSERT INTO "axis_checkpoint" VALUES (?, ?)`, [axisId, whole]);
  await migration.up(runner);
  const rows = (await runner.query(
    `SELECT "axisId", "part", "state" FROM "axis_checkpoint" ORDER BY "axisId", "part"`,
  )) as { axisId: number; part: number; state: Buffer }[];
  expect(rows.map(({ axisId, part }) => [axisId, part])).toEqual(
    [3, 8].flatMap((id) => [-1, 0, 1, 2].map((part) => [id, part])),
  );
  expect(rows[0]!.state).toEqual(header);
  expect(Buffer.concat(rows.slice(1, 4).map(({ state }) => state))).toEqual(arrays);
  await migration.down(runner);
  const back = (await runner.query(`SELECT "state" FROM "axis_checkpoint"`)) as { state: Buffer }[];
  expect(back.map(({ state }) => state)).toEqual([whole, whole]);
  await migration.up(runner);
  await dataSource.destroy();
});
