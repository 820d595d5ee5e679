import type { MigrationInterface, QueryRunner } from 'typeorm';

const COLUMNS: [table: string, column: string, type: string][] = [
  ['alert', 'suppressedBecause', 'text'],
  ['alert', 'outOfServiceBy', 'text'],
  ['alert', 'outOfServiceReason', 'text'],
  ['alert', 'gatewayId', 'integer'],
  ['alert', 'consequence', 'text'],
  ['alert', 'respondWithin', 'integer'],
  ['alert', 'standsSince', 'datetime'],
  ['alert', 'fallbackToldAt', 'datetime'],
  ['alert_rule', 'unknownAfter', 'integer'],
  ['alert_rule', 'respondWithin', 'integer'],
  ['alert_rule', 'consequence', 'text'],
  ['alert_rule', 'whatToDo', 'text'],
];

/** Out of service, one alert per dead gateway, timers that outlive a restart, and what a rule says. */
export class AlertLifeCycle1764736000100 implements MigrationInterface {
  name = 'AlertLifeCycle1764736000100';

  async up(runner: QueryRunner): Promise<void> {
    for (const [table, column, type] of COLUMNS)
      await runner.query(`ALTER TABLE "${table}" ADD COLUMN "${column}" ${type}`);
    await runner.query(`CREATE INDEX "IDX_alert_raisedAt" ON "alert" ("raisedAt")`);
    await runner.query(`CREATE TABLE "alert_timer" (
      "axisId" integer NOT NULL,
      "rule" text NOT NULL,
      "active" boolean NOT NULL,
      "since" real,
      "unknownSince" real,
      PRIMARY KEY ("axisId", "rule")
    ) WITHOUT ROWID`);
    await runner.query(`CREATE TABLE "served_axis" (
      "axisId" integer PRIMARY KEY NOT NULL,
      "gatewayId" integer NOT NULL
    ) WITHOUT ROWID`);
  }

  async down(runner: QueryRunner): Promise<void> {
    await runner.query(`DROP TABLE "served_axis"`);
    await runner.query(`DROP TABLE "alert_timer"`);
    await runner.query(`DROP INDEX "IDX_alert_raisedAt"`);
    for (const [table, column] of [...COLUMNS].reverse())
      await runner.query(`ALTER TABLE "${table}" DROP COLUMN "${column}"`);
  }
}
