import { DataSource } from 'typeorm';
import { afterEach, beforeEach, expect, test } from 'vitest';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { Transactions } from '../../src/database/transactions.js';
import { Axis } from '../../src/fleet/axis.entity.js';
import { AxesAtHand } from '../../src/telemetry/axes-at-hand.js';

let dataSource: DataSource;
let atHand: AxesAtHand;

beforeEach(async () => {
  dataSource = await new DataSource(dataSourceOptions(':memory:')).initialize();
  for (const statement of [
    `INSERT INTO "site" ("name", "timeZone") VALUES ('Tile Hall', 'Europe/London')`,
    `INSERT INTO "machine" ("siteId", "name") VALUES (1, 'Cutter')`,
    `INSERT INTO "axis" ("siteId", "machineId", "tag", "name", "actuator", "resolution", "sampleTime", "travel", "move",
       "tolerances", "structure", "pattern", "feedForward")
     VALUES (1, 1, 'TC-01', 'feed', 'electric', 0.01, 0.001, '{}', '{}', '{}', 'pid', '{}', 0)`,
  ])
    await dataSource.query(statement);
  atHand = new AxesAtHand(dataSource);
});
afterEach(() => dataSource.destroy());

const reasons = async (): Promise<string[]> =>
  (await atHand.all()).map(({ stateReason, site }) => `${site.name}: ${stateReason}`);

test('axes are read once while none is written', async () => {
  expect(await atHand.all()).toBe(await atHand.all());
});

test('a statement written by hand is seen, of an axis as of its site', async () => {
  expect(await reasons()).toEqual(['Tile Hall: No samples yet.']);
  await dataSource.query(`UPDATE "axis" SET "stateReason" = 'Seal worn.' WHERE "id" = 1`);
  expect(await reasons()).toEqual(['Tile Hall: Seal worn.']);
  await dataSource.query(`UPDATE "site" SET "name" = 'Kiln Yard'`);
  expect(await reasons()).toEqual(['Kiln Yard: Seal worn.']);
  await dataSource.query(`DELETE FROM "axis"`);
  expect(await reasons()).toEqual([]);
});

test('what TypeORM writes is seen; what is taken back was never so', async () => {
  const repository = dataSource.getRepository(Axis);
  await repository.update({ tag: 'TC-01' }, { stateReason: 'Grease aged.' });
  expect(await reasons()).toEqual(['Tile Hall: Grease aged.']);
  await expect(
    new Transactions(dataSource).run(async (manager) => {
      await manager.update(Axis, 1, { stateReason: 'Never so.' });
      expect(await reasons()).toEqual(['Tile Hall: Never so.']);
      throw new Error('taken back');
    }),
  ).rejects.toThrow('taken back');
  expect(await reasons()).toEqual(['Tile Hall: Grease aged.']);
});
