import type { MigrationInterface, QueryRunner } from 'typeorm';

/** Every version of a proposal with its gains, who and when. Of proposals made before only the present version is known. */
export class ProposalVersions1764637000200 implements MigrationInterface {
  name = 'ProposalVersions1764637000200';

  async up(runner: QueryRunner): Promise<void> {
    await runner.query(`CREATE TABLE "proposal_version" (
      "id" integer PRIMARY KEY AUTOINCREMENT NOT NULL,
      "proposalId" integer NOT NULL,
      "version" integer NOT NULL,
      "at" datetime NOT NULL,
      "by" varchar NOT NULL,
      "proposed" text,
      "note" text,
      CONSTRAINT "UQ_5ee52dffd20cf56b9ca9bba8bcb" UNIQUE ("proposalId", "version"),
      CONSTRAINT "FK_8b509e29d7347c0b18342dfe38d" FOREIGN KEY ("proposalId") REFERENCES "proposal" ("id") ON DELETE NO ACTION ON UPDATE NO ACTION
    )`);
    await runner.query(`INSERT INTO "proposal_version" ("proposalId", "version", "at", "by", "proposed", "note")
      SELECT p."id", p."version", e."at", e."by", p."proposed", e."note"
      FROM "proposal" p JOIN "proposal_event" e ON e."id" =
        (SELECT MAX("id") FROM "proposal_event" WHERE "proposalId" = p."id" AND "version" = p."version"
          AND "action" IN ('drafted', 'altered', 'newer evidence'))`);
  }

  async down(runner: QueryRunner): Promise<void> {
    await runner.query(`DROP TABLE "proposal_version"`);
  }
}
