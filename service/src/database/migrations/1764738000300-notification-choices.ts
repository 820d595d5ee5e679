import type { MigrationInterface, QueryRunner } from 'typeorm';

const UP = [
  `ALTER TABLE "user" ADD COLUMN "dailyDigest" boolean NOT NULL DEFAULT (1)`,
  `ALTER TABLE "user" ADD COLUMN "phone" text`,
  `ALTER TABLE "user" ADD COLUMN "smsAlerts" boolean NOT NULL DEFAULT (0)`,
  `CREATE TABLE "push_subscription" (
    "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
    "userId" integer NOT NULL,
    "endpoint" varchar NOT NULL,
    "p256dh" varchar NOT NULL,
    "auth" varchar NOT NULL,
    "browser" varchar NOT NULL,
    "createdAt" datetime NOT NULL DEFAULT (datetime('now')),
    CONSTRAINT "UQ_27ae9074fc39a09bc1aee263df5" UNIQUE ("endpoint"),
    CONSTRAINT "FK_8a227cbc3dc43c0d56117ea1563" FOREIGN KEY ("userId") REFERENCES "user" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
  )`,
  `CREATE INDEX "IDX_8a227cbc3dc43c0d56117ea156" ON "push_subscription" ("userId")`,
];

const DOWN = [
  `DROP TABLE "push_subscription"`,
  ...['smsAlerts', 'phone', 'dailyDigest'].map((column) => `ALTER TABLE "user" DROP COLUMN "${column}"`),
];

/** How a person wants to be told: the morning's mail, SMS, browsers that show push messages. */
export class NotificationChoices1764738000300 implements MigrationInterface {
  name = 'NotificationChoices1764738000300';

  async up(runner: QueryRunner): Promise<void> {
    for (const statement of UP) await runner.query(statement);
  }

  async down(runner: QueryRunner): Promise<void> {
    for (const statement of DOWN) await runner.query(statement);
  }
}
