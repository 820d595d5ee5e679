import { expect, test } from 'vitest';
import { startPeople } from './people-app.js';

test('the migration makes exactly the tables that the entities describe', async () => {
  const { dataSource, close } = await startPeople({}, { seed: false });
  const { upQueries } = await dataSource.driver.createSchemaBuilder().log();
  expect(upQueries.map(({ query }) => query)).toEqual([]);
  await close();
});

test('the migration can be taken back', async () => {
  const { dataSource, close } = await startPeople({}, { seed: false });
  await dataSource.query('DELETE FROM "site"');
  await dataSource.undoLastMigration();
  const tables = (await dataSource.query(`SELECT name FROM sqlite_master WHERE type = 'table'`)) as {
    name: string;
  }[];
  expect(tables.map(({ name }) => name).sort()).toEqual(['migrations', 'site', 'sqlite_sequence']);
  await close();
});
