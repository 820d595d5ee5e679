import type { MigrationInterface, QueryRunner } from 'typeorm';

const UP = [
  `ALTER TABLE "mail_outbox" ADD COLUMN "channel" text NOT NULL DEFAULT ('mail')`,
  `ALTER TABLE "mail_outbox" ADD COLUMN "picture" text`,
  `ALTER TABLE "mail_outbox" ADD COLUMN "pictureText" text`,
  `ALTER TABLE "mail_outbox" ADD COLUMN "startedAt" datetime`,
  `ALTER TABLE "mail_outbox" ADD COLUMN "perhapsAgain" boolean NOT NULL DEFAULT (0)`,
  `ALTER TABLE "mail_outbox" ADD COLUMN "groupId" integer`,
  `CREATE INDEX "IDX_157576b267339bf0b35acf518f" ON "mail_outbox" ("to", "createdAt")`,
  `CREATE TABLE "acknowledge_link" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "alertId" integer NOT NULL,
    "raisedAt" datetime NOT NULL,
    "userId" integer NOT NULL,
    "expiresAt" datetime NOT NULL,
    "usedAt" datetime
  )`,
  `CREATE INDEX "IDX_753f2ac52afaf5f6dfad1ee1ba" ON "acknowledge_link" ("alertId")`,
];

const DOWN = [
  `DROP TABLE "acknowledge_link"`,
  `DROP INDEX "IDX_157576b267339bf0b35acf518f"`,
  ...['groupId', 'perhapsAgain', 'startedAt', 'pictureText', 'picture', 'channel'].map(
    (column) => `ALTER TABLE "mail_outbox" DROP COLUMN "${column}"`,
  ),
];

/** What the outbox knows of an attempt under way, pictures, grouped mails; links that acknowledge once. */
export class OutboxAttempts1764738000200 implements MigrationInterface {
  name = 'OutboxAttempts1764738000200';

  async up(runner: QueryRunner): Promise<void> {
    for (const statement of UP) await runner.query(statement);
  }

  async down(runner: QueryRunner): Promise<void> {
    for (const statement of DOWN) await runner.query(statement);
  }
}
