import type { MigrationInterface, QueryRunner } from 'typeorm';

const UP = [
  `CREATE TABLE "user" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "name" varchar NOT NULL,
    "email" varchar NOT NULL,
    "passwordHash" varchar NOT NULL,
    "owner" boolean NOT NULL DEFAULT (0),
    "disabled" boolean NOT NULL DEFAULT (0),
    "demo" boolean NOT NULL DEFAULT (0),
    "lastSignInAt" datetime,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    CONSTRAINT "UQ_e12875dfb3b1d92d7d7c5377e22" UNIQUE ("email")
  )`,
  `CREATE TABLE "user_role" (
    "userId" integer NOT NULL,
    "siteId" integer NOT NULL,
    "role" text NOT NULL,
    CONSTRAINT "FK_ab40a6f0cd7d3ebfcce082131fd" FOREIGN KEY ("userId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_0d3d71b0048da51899b74f635d3" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    PRIMARY KEY ("userId", "siteId")
  )`,
  `CREATE INDEX "IDX_0d3d71b0048da51899b74f635d" ON "user_role" ("siteId")`,
  `CREATE TABLE "invitation" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "purpose" text NOT NULL,
    "email" text,
    "name" varchar NOT NULL,
    "userId" integer,
    "roles" text NOT NULL,
    "owner" boolean NOT NULL DEFAULT (0),
    "tokenHash" varchar NOT NULL,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    "createdById" integer,
    "expiresAt" datetime NOT NULL,
    "acceptedAt" datetime,
    "revokedAt" datetime,
    CONSTRAINT "UQ_676ef6471ce7176869d73365a45" UNIQUE ("tokenHash"),
    CONSTRAINT "FK_05191060fae5b5485327709be7f" FOREIGN KEY ("userId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_765ded79aea72509a235e9d33a1" FOREIGN KEY ("createdById") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "refresh_token" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "userId" integer NOT NULL,
    "family" varchar NOT NULL,
    "tokenHash" varchar NOT NULL,
    "createdAt" datetime NOT NULL,
    "expiresAt" datetime NOT NULL,
    "usedAt" datetime,
    "revokedAt" datetime,
    CONSTRAINT "UQ_204f27bcee2b705b8230beaf414" UNIQUE ("tokenHash"),
    CONSTRAINT "FK_8e913e288156c133999341156ad" FOREIGN KEY ("userId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE INDEX "IDX_8e913e288156c133999341156a" ON "refresh_token" ("userId")`,
  `CREATE INDEX "IDX_407cbf7a33b94af93195029996" ON "refresh_token" ("family")`,
  `CREATE TABLE "audit_entry" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "at" datetime NOT NULL,
    "userId" integer,
    "actor" varchar NOT NULL,
    "action" varchar NOT NULL,
    "subjectType" varchar NOT NULL,
    "subjectId" varchar NOT NULL,
    "siteId" integer,
    "note" text,
    "before" text,
    "after" text,
    "previousHash" varchar NOT NULL,
    "hash" varchar NOT NULL,
    CONSTRAINT "UQ_12a5edfbbf2d6871af9a0d52a5b" UNIQUE ("previousHash"),
    CONSTRAINT "UQ_d099f32d77ce3db4700a14896e6" UNIQUE ("hash")
  )`,
  `CREATE INDEX "IDX_70fe681764d9cba3548568a953" ON "audit_entry" ("siteId")`,
  `CREATE INDEX "IDX_3b7fe01e452af9d9926a47358d" ON "audit_entry" ("subjectType", "subjectId")`,
  `CREATE TABLE "rota_layer" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "memberIds" text NOT NULL,
    "handOverTime" varchar NOT NULL,
    "rotationDays" integer NOT NULL,
    "startDate" varchar NOT NULL,
    CONSTRAINT "UQ_89ee2bb071e365422c00d01e3ca" UNIQUE ("siteId"),
    CONSTRAINT "FK_89ee2bb071e365422c00d01e3ca" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE TABLE "rota_override" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "userId" integer NOT NULL,
    "from" datetime NOT NULL,
    "to" datetime NOT NULL,
    "reason" varchar NOT NULL,
    "createdById" integer,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    CONSTRAINT "FK_569f461d725037a95f7fe3aa370" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_33b87e27fbba39108d0cd6a2d84" FOREIGN KEY ("userId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_9f374a8ad315d397eb274c85307" FOREIGN KEY ("createdById") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE INDEX "IDX_05df2253a5607a461436d24327" ON "rota_override" ("siteId", "to")`,
  `CREATE TABLE "handover_note" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "siteId" integer NOT NULL,
    "at" datetime NOT NULL,
    "userId" integer NOT NULL,
    "text" varchar NOT NULL,
    CONSTRAINT "FK_a93b58009d9f0bb23a1dd0597c7" FOREIGN KEY ("siteId") REFERENCES "site" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION,
    CONSTRAINT "FK_469f9fa67484b3cae101aa3ea6f" FOREIGN KEY ("userId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE INDEX "IDX_a93b58009d9f0bb23a1dd0597c" ON "handover_note" ("siteId")`,
  `CREATE TABLE "mail_outbox" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "key" varchar NOT NULL,
    "to" varchar NOT NULL,
    "subject" varchar NOT NULL,
    "text" varchar NOT NULL,
    "html" varchar NOT NULL,
    "siteId" integer,
    "alertId" integer,
    "state" text NOT NULL DEFAULT ('queued'),
    "attempts" integer NOT NULL DEFAULT (0),
    "nextAttemptAt" datetime NOT NULL,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    "sentAt" datetime,
    "error" text,
    CONSTRAINT "UQ_ee7ac3cbae441904e14b339104f" UNIQUE ("key")
  )`,
  `CREATE INDEX "IDX_f3ea38a2edbfbe3e2f36bad4ea" ON "mail_outbox" ("alertId")`,
  `CREATE INDEX "IDX_18730f95855e4988c1f6114476" ON "mail_outbox" ("state", "nextAttemptAt")`,
  // The record is only ever added to.
  `CREATE TRIGGER "audit_entry_is_never_altered" BEFORE UPDATE ON "audit_entry"
   BEGIN SELECT RAISE(ABORT, 'an audit entry is never altered'); END`,
  `CREATE TRIGGER "audit_entry_is_never_deleted" BEFORE DELETE ON "audit_entry"
   BEGIN SELECT RAISE(ABORT, 'an audit entry is never deleted'); END`,
];

const TABLES = [
  'mail_outbox',
  'handover_note',
  'rota_override',
  'rota_layer',
  'audit_entry',
  'refresh_token',
  'invitation',
  'user_role',
  'user',
];

/** People and their roles, sign-in, the record, the rota and the mail outbox. */
export class People1764547201000 implements MigrationInterface {
  name = 'People1764547201000';

  async up(runner: QueryRunner): Promise<void> {
    for (const statement of UP) await runner.query(statement);
  }

  async down(runner: QueryRunner): Promise<void> {
    for (const table of TABLES) await runner.query(`DROP TABLE "${table}"`);
  }
}
