import type { MigrationInterface, QueryRunner } from 'typeorm';

const UP = [
  // SQLite cannot take a constraint off a table: the layers move to a new one.
  `CREATE TABLE "new_rota_layer" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "position" integer NOT NULL DEFAULT (0),
    "name" varchar NOT NULL DEFAULT ('Rotation'),
    "memberIds" text NOT NULL,
    "handOverTime" varchar NOT NULL,
    "rotationDays" integer NOT NULL,
    "startDate" varchar NOT NULL,
    "endDate" text,
    "weekdays" text NOT NULL DEFAULT ('[1,2,3,4,5,6,7]'),
    "hours" text,
    CONSTRAINT "FK_89ee2bb071e365422c00d01e3ca" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `INSERT INTO "new_rota_layer" ("id", "siteId", "memberIds", "handOverTime", "rotationDays", "startDate")
   SELECT "id", "siteId", "memberIds", "handOverTime", "rotationDays", "startDate" FROM "rota_layer"`,
  `DROP TABLE "rota_layer"`,
  `ALTER TABLE "new_rota_layer" RENAME TO "rota_layer"`,
  `CREATE UNIQUE INDEX "IDX_275edb6e6484129e16eb5eac5d" ON "rota_layer" ("siteId", "position")`,
  `CREATE TABLE "rota_swap" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "askedById" integer NOT NULL,
    "askedOfId" integer NOT NULL,
    "from" datetime NOT NULL,
    "to" datetime NOT NULL,
    "returnFrom" datetime,
    "returnTo" datetime,
    "reason" varchar NOT NULL,
    "state" text NOT NULL DEFAULT ('asked'),
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    "answeredAt" datetime,
    CONSTRAINT "FK_c730b39126cfed53e18682a0e91" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_39410edc71eb69a42063a92d9c1" FOREIGN KEY ("askedById") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_619779bbddfdbf5d4f5f4cbb2df" FOREIGN KEY ("askedOfId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE INDEX "IDX_b615eb341e805ed2bbfdc576d7" ON "rota_swap" ("siteId", "state")`,
  `CREATE TABLE "calendar_feed" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "userId" integer NOT NULL,
    "siteId" integer NOT NULL,
    "own" boolean NOT NULL,
    "tokenHash" varchar NOT NULL,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    "lastReadAt" datetime,
    "revokedAt" datetime,
    CONSTRAINT "UQ_ac5ef5308807b545c5349b002f3" UNIQUE ("tokenHash"),
    CONSTRAINT "FK_f6779773c62bb47bf4001a69060" FOREIGN KEY ("userId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_82095df0d7b4cf4d985fe8d103f" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE INDEX "IDX_f6779773c62bb47bf4001a6906" ON "calendar_feed" ("userId")`,
];

const DOWN = [
  `DROP TABLE "calendar_feed"`,
  `DROP TABLE "rota_swap"`,
  `CREATE TABLE "old_rota_layer" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "memberIds" text NOT NULL,
    "handOverTime" varchar NOT NULL,
    "rotationDays" integer NOT NULL,
    "startDate" varchar NOT NULL,
    CONSTRAINT "UQ_89ee2bb071e365422c00d01e3ca" UNIQUE ("siteId"),
    CONSTRAINT "FK_89ee2bb071e365422c00d01e3ca" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `INSERT INTO "old_rota_layer" ("id", "siteId", "memberIds", "handOverTime", "rotationDays", "startDate")
   SELECT "id", "siteId", "memberIds", "handOverTime", "rotationDays", "startDate" FROM "rota_layer" WHERE "position" = 0`,
  `DROP TABLE "rota_layer"`,
  `ALTER TABLE "old_rota_layer" RENAME TO "rota_layer"`,
];

/** Several layers a site, swaps that are asked and answered, private calendar feeds. */
export class RotaLayers1764738000100 implements MigrationInterface {
  name = 'RotaLayers1764738000100';

  async up(runner: QueryRunner): Promise<void> {
    for (const statement of UP) await runner.query(statement);
  }

  /** Only a site's lowest layer has a place in the former table. */
  async down(runner: QueryRunner): Promise<void> {
    for (const statement of DOWN) await runner.query(statement);
  }
}
