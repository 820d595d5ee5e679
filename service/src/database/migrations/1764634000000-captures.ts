import type { MigrationInterface, QueryRunner } from 'typeorm';

/** Uploaded and recorded captures. */
export class Captures1764634000000 implements MigrationInterface {
  name = 'Captures1764634000000';

  async up(queryRunner: QueryRunner): Promise<void> {
    await queryRunner.query(`CREATE TABLE "capture" (
      "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
      "siteId" integer NOT NULL,
      "axisId" integer,
      "source" varchar NOT NULL,
      "alertId" integer,
      "createdAt" datetime NOT NULL,
      "createdById" integer,
      "fileName" varchar NOT NULL,
      "status" varchar NOT NULL,
      "problem" text,
      "mapping" text,
      "recorded" boolean NOT NULL,
      "samples" integer,
      "sampleTime" double,
      "duration" double,
      "result" text,
      CONSTRAINT "FK_1aacb4ee281842e2187c841861f" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
      CONSTRAINT "FK_e7e0c0ca5217791b76e3d4cf86b" FOREIGN KEY ("axisId") REFERENCES "axis" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
      CONSTRAINT "FK_0dee2066f93c3ae7bc4c1089ccb" FOREIGN KEY ("createdById") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
    )`);
    await queryRunner.query(`CREATE INDEX "IDX_3f6c9aa48e2b6201cc2ef91dda" ON "capture" ("status")`);
    await queryRunner.query(`CREATE INDEX "IDX_e7e0c0ca5217791b76e3d4cf86" ON "capture" ("axisId")`);
    await queryRunner.query(`CREATE INDEX "IDX_1aacb4ee281842e2187c841861" ON "capture" ("siteId")`);
  }

  async down(queryRunner: QueryRunner): Promise<void> {
    await queryRunner.query(`DROP TABLE "capture"`);
  }
}
