import type { MigrationInterface, QueryRunner } from 'typeorm';

const UP = [
  `CREATE TABLE "site" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "name" varchar NOT NULL,
    "timeZone" varchar NOT NULL,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    CONSTRAINT "UQ_9669a09fcc0eb6d2794a658f647" UNIQUE ("name")
  )`,
  `CREATE TABLE "machine" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "name" varchar NOT NULL,
    CONSTRAINT "UQ_fd4bca8e487b0cc9a23e9d40ccd" UNIQUE ("siteId", "name"),
    CONSTRAINT "FK_712b3b05d666f6f9676f02e4ce0" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "gateway" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "name" varchar NOT NULL,
    "tokenHash" varchar NOT NULL,
    "epoch" text,
    "durableSequence" integer NOT NULL DEFAULT (0),
    "lastSeenAt" datetime,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    CONSTRAINT "UQ_4c39db48f5e3ca2729298f16121" UNIQUE ("tokenHash"),
    CONSTRAINT "UQ_732c2d67d2c415fcd097895a0cf" UNIQUE ("siteId", "name"),
    CONSTRAINT "FK_a622c5a1a1dbb657c0b5678b76d" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "axis" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "machineId" integer NOT NULL,
    "tag" varchar NOT NULL,
    "name" varchar NOT NULL,
    "actuator" text NOT NULL,
    "resolution" real NOT NULL,
    "sampleTime" real NOT NULL,
    "travel" text NOT NULL,
    "move" text NOT NULL,
    "tolerances" text NOT NULL,
    "structure" text NOT NULL,
    "pattern" text NOT NULL,
    "feedForward" boolean NOT NULL,
    "baseline" text,
    "baselineAt" datetime,
    "revision" integer NOT NULL DEFAULT (0),
    "state" text NOT NULL DEFAULT ('no-signal'),
    "stateReason" varchar NOT NULL DEFAULT ('No samples yet.'),
    "stateSince" datetime,
    "inMaintenance" boolean NOT NULL DEFAULT (0),
    "maintenanceUntil" datetime,
    "maintenanceReason" text,
    "maintenanceBy" text,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    CONSTRAINT "UQ_6cb4575d351613e4bed39d12581" UNIQUE ("siteId", "tag"),
    CONSTRAINT "FK_3680da0afffc13058418b1436a6" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_6c9ddab29cb8eb35dede6e92141" FOREIGN KEY ("machineId") REFERENCES "machine" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "tuning_revision" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "axisId" integer NOT NULL,
    "revision" integer NOT NULL,
    "structure" text NOT NULL,
    "pattern" text,
    "feedForward" boolean NOT NULL,
    "gains" text NOT NULL,
    "plant" text,
    "source" text NOT NULL,
    "proposalId" integer,
    "appliedAt" datetime NOT NULL,
    "appliedBy" varchar NOT NULL,
    "note" text,
    CONSTRAINT "UQ_620c74e137c701f01ffbfdfe385" UNIQUE ("axisId", "revision"),
    CONSTRAINT "FK_c2c33a25cdf31e1c7a7275f4d39" FOREIGN KEY ("axisId") REFERENCES "axis" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "indicator_second" (
    "axisId" integer NOT NULL,
    "t" integer NOT NULL,
    "samples" integer NOT NULL,
    "movingSamples" integer NOT NULL,
    "peakMovingError" real NOT NULL,
    "sumSquaredMovingError" real NOT NULL,
    "peakStandingError" real NOT NULL,
    "sumSquaredStandingError" real NOT NULL,
    "saturatedSamples" integer NOT NULL,
    "peakOutput" real NOT NULL,
    "sumSquaredOutput" real NOT NULL,
    "sumSquaredActivity" real NOT NULL,
    "activityCrossings" integer NOT NULL,
    "coveredSeconds" real NOT NULL,
    "gaps" integer NOT NULL,
    PRIMARY KEY ("axisId", "t")
  ) WITHOUT ROWID`,
  `CREATE TABLE "indicator_minute" (
    "axisId" integer NOT NULL,
    "t" integer NOT NULL,
    "samples" integer NOT NULL,
    "movingSamples" integer NOT NULL,
    "peakMovingError" real NOT NULL,
    "sumSquaredMovingError" real NOT NULL,
    "peakStandingError" real NOT NULL,
    "sumSquaredStandingError" real NOT NULL,
    "saturatedSamples" integer NOT NULL,
    "peakOutput" real NOT NULL,
    "sumSquaredOutput" real NOT NULL,
    "sumSquaredActivity" real NOT NULL,
    "activityCrossings" integer NOT NULL,
    "coveredSeconds" real NOT NULL,
    "gaps" integer NOT NULL,
    PRIMARY KEY ("axisId", "t")
  ) WITHOUT ROWID`,
  `CREATE TABLE "indicator_hour" (
    "axisId" integer NOT NULL,
    "t" integer NOT NULL,
    "samples" integer NOT NULL,
    "movingSamples" integer NOT NULL,
    "peakMovingError" real NOT NULL,
    "sumSquaredMovingError" real NOT NULL,
    "peakStandingError" real NOT NULL,
    "sumSquaredStandingError" real NOT NULL,
    "saturatedSamples" integer NOT NULL,
    "peakOutput" real NOT NULL,
    "sumSquaredOutput" real NOT NULL,
    "sumSquaredActivity" real NOT NULL,
    "activityCrossings" integer NOT NULL,
    "coveredSeconds" real NOT NULL,
    "gaps" integer NOT NULL,
    PRIMARY KEY ("axisId", "t")
  ) WITHOUT ROWID`,
  `CREATE TABLE "move_record" (
    "axisId" integer NOT NULL,
    "t" real NOT NULL,
    "revision" integer NOT NULL,
    "distance" real NOT NULL,
    "duration" real NOT NULL,
    "peakError" real NOT NULL,
    "rmsError" real NOT NULL,
    "saturatedPct" real NOT NULL,
    PRIMARY KEY ("axisId", "t")
  ) WITHOUT ROWID`,
  `CREATE TABLE "plant_estimate_row" (
    "axisId" integer NOT NULL,
    "t" real NOT NULL,
    "estimate" text NOT NULL,
    "chart" text,
    PRIMARY KEY ("axisId", "t")
  ) WITHOUT ROWID`,
  `CREATE TABLE "axis_checkpoint" (
    "axisId" integer PRIMARY KEY NOT NULL,
    "state" blob NOT NULL
  ) WITHOUT ROWID`,
  `CREATE TABLE "alert_rule" (
    "rule" text PRIMARY KEY NOT NULL,
    "threshold" real NOT NULL,
    "deadband" real NOT NULL,
    "onDelay" integer NOT NULL,
    "offDelay" integer NOT NULL,
    "priority" text NOT NULL,
    "mailAfter" integer NOT NULL
  )`,
  `CREATE TABLE "alert" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "axisId" integer NOT NULL,
    "rule" text NOT NULL,
    "priority" text NOT NULL,
    "state" text NOT NULL,
    "raisedAt" datetime NOT NULL,
    "acknowledgedAt" datetime,
    "acknowledgedBy" text,
    "returnedAt" datetime,
    "shelvedUntil" datetime,
    "shelvedBy" text,
    "shelveReason" text,
    "value" real NOT NULL,
    "threshold" real NOT NULL,
    "message" varchar NOT NULL,
    "action" varchar NOT NULL,
    "stepsTaken" integer NOT NULL DEFAULT (0),
    "nextStepAt" datetime,
    CONSTRAINT "FK_913607a19435e7f16de4f8e4b94" FOREIGN KEY ("axisId") REFERENCES "axis" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "alert_event" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "alertId" integer NOT NULL,
    "at" datetime NOT NULL,
    "by" varchar NOT NULL,
    "action" varchar NOT NULL,
    "note" text,
    CONSTRAINT "FK_49920ddaae6e34690adf7d856ee" FOREIGN KEY ("alertId") REFERENCES "alert" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "proposal" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "axisId" integer NOT NULL,
    "state" text NOT NULL,
    "version" integer NOT NULL,
    "source" text NOT NULL,
    "evidence" text NOT NULL,
    "probableCause" text,
    "current" text NOT NULL,
    "proposed" text,
    "noGainsReason" text,
    "expected" text,
    "binding" text,
    "note" text,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    "alteredById" integer,
    "submittedById" integer,
    "approvedById" integer,
    "approvedVersion" integer,
    "windowFrom" datetime,
    "windowTo" datetime,
    "revision" integer,
    "sentAt" datetime,
    "appliedById" integer,
    "appliedAt" datetime,
    "rollingBack" boolean NOT NULL DEFAULT (0),
    "trial" text,
    CONSTRAINT "FK_d8a35a6c421694220dbb965c823" FOREIGN KEY ("axisId") REFERENCES "axis" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "proposal_event" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "proposalId" integer NOT NULL,
    "at" datetime NOT NULL,
    "by" varchar NOT NULL,
    "action" varchar NOT NULL,
    "note" text,
    "version" integer NOT NULL,
    CONSTRAINT "FK_47f11aa2f75991f3295df3a2312" FOREIGN KEY ("proposalId") REFERENCES "proposal" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE INDEX "IDX_7c7218d0ff51ea1b60ca1e39af" ON "alert" ("state")`,
  `CREATE UNIQUE INDEX "IDX_60d1b0e52307436c9aa284d42a" ON "alert" ("axisId", "rule") WHERE "state" <> 'normal'`,
  `CREATE INDEX "IDX_49920ddaae6e34690adf7d856e" ON "alert_event" ("alertId")`,
  `CREATE INDEX "IDX_2a794f37fc13611327b2e8d0d0" ON "proposal" ("state")`,
  `CREATE UNIQUE INDEX "IDX_99a97693459539634f7e7944aa" ON "proposal" ("axisId") WHERE "state" IN ('drafted','in review','approved','scheduled','applying','on trial')`,
  `CREATE INDEX "IDX_47f11aa2f75991f3295df3a231" ON "proposal_event" ("proposalId")`,
];

const TABLES = ['site', 'machine', 'gateway', 'axis', 'tuning_revision', 'indicator_second', 'indicator_minute', 'indicator_hour', 'move_record', 'plant_estimate_row', 'axis_checkpoint', 'alert_rule', 'alert', 'alert_event', 'proposal', 'proposal_event'];

/** Sites, machines, gateways, axes, tunings, what their samples showed, alerts and proposals. */
export class Fleet1764547200000 implements MigrationInterface {
  name = 'Fleet1764547200000';

  async up(queryRunner: QueryRunner): Promise<void> {
    for (const statement of UP) await queryRunner.query(statement);
  }

  async down(queryRunner: QueryRunner): Promise<void> {
    for (const table of [...TABLES].reverse()) await queryRunner.query(`DROP TABLE "${table}"`);
  }
}
