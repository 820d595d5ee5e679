import type { MigrationInterface, QueryRunner } from 'typeorm';

/** What a change at a machine needs beside the proposal: gains to be restored, and a site's own checklist. */
export class ChangesAtMachines1764637000100 implements MigrationInterface {
  name = 'ChangesAtMachines1764637000100';

  async up(runner: QueryRunner): Promise<void> {
    await runner.query(`ALTER TABLE "proposal" ADD COLUMN "restoring" boolean NOT NULL DEFAULT (0)`);
    await runner.query(`CREATE TABLE "site_checklist_item" (
      "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
      "siteId" integer NOT NULL,
      "text" varchar NOT NULL,
      "place" integer,
      CONSTRAINT "FK_a0a3caac4d531f4dafeba727f5d" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
    )`);
    await runner.query(`CREATE INDEX "IDX_a0a3caac4d531f4dafeba727f5" ON "site_checklist_item" ("siteId")`);
  }

  async down(runner: QueryRunner): Promise<void> {
    await runner.query(`DROP TABLE "site_checklist_item"`);
    await runner.query(`ALTER TABLE "proposal" DROP COLUMN "restoring"`);
  }
}
