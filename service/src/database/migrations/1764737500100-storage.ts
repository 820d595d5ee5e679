import type { MigrationInterface, QueryRunner } from 'typeorm';

/** How long everything is kept, what the tables held from time to time, and what integrity checks said. */
export class Storage1764737500100 implements MigrationInterface {
  name = 'Storage1764737500100';

  async up(runner: QueryRunner): Promise<void> {
    await runner.query(`CREATE TABLE "retention_setting" (
      "kind" text PRIMARY KEY NOT NULL,
      "keptSeconds" integer NOT NULL
    )`);
    await runner.query(`CREATE TABLE "storage_measurement" (
      "t" integer NOT NULL,
      "name" varchar NOT NULL,
      "rows" integer NOT NULL,
      "bytes" integer NOT NULL,
      "oldest" real,
      PRIMARY KEY ("t", "name")
    ) WITHOUT ROWID`);
    await runner.query(`CREATE TABLE "integrity_check" (
      "subject" varchar PRIMARY KEY NOT NULL,
      "bytes" integer NOT NULL,
      "at" datetime NOT NULL,
      "fault" text
    )`);
  }

  async down(runner: QueryRunner): Promise<void> {
    for (const table of ['retention_setting', 'storage_measurement', 'integrity_check'])
      await runner.query(`DROP TABLE "${table}"`);
  }
}
