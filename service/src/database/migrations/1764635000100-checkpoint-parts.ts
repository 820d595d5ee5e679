import type { MigrationInterface, QueryRunner } from 'typeorm';

/** Bytes of a part, and the part of the judgement: what `StateImage` and `AxisCheckpoint` say at this version. */
const PART_BYTES = 960;
const JUDGEMENT_PART = -1;

interface Whole {
  axisId: number;
  state: Buffer;
}
interface Part extends Whole {
  part: number;
}

/** An axis's checkpoint in parts, so that only what changed is written; what was saved whole is cut up. */
export class CheckpointParts1764635000100 implements MigrationInterface {
  name = 'CheckpointParts1764635000100';

  async up(queryRunner: QueryRunner): Promise<void> {
    const saved = (await queryRunner.query(`SELECT "axisId", "state" FROM "axis_checkpoint"`)) as Whole[];
    await queryRunner.query(`DROP TABLE "axis_checkpoint"`);
    await queryRunner.query(`CREATE TABLE "axis_checkpoint" (
      "axisId" integer NOT NULL,
      "part" integer NOT NULL,
      "state" blob NOT NULL,
      PRIMARY KEY ("axisId", "part")
    ) WITHOUT ROWID`);
    for (const { axisId, state } of saved) {
      const insert = (part: number, bytes: Buffer): Promise<unknown> =>
        queryRunner.query(`INSERT INTO "axis_checkpoint" ("axisId", "part", "state") VALUES (?, ?, ?)`, [
          axisId,
          part,
          bytes,
        ]);
      const arrays = 4 + state.readUInt32LE(0);
      await insert(JUDGEMENT_PART, state.subarray(4, arrays));
      for (let part = 0; arrays + part * PART_BYTES < state.byteLength; part++)
        await insert(part, state.subarray(arrays + part * PART_BYTES, arrays + (part + 1) * PART_BYTES));
    }
  }

  async down(queryRunner: QueryRunner): Promise<void> {
    const parts = (await queryRunner.query(
      `SELECT "axisId", "part", "state" FROM "axis_checkpoint" ORDER BY "axisId", "part"`,
    )) as Part[];
    await queryRunner.query(`DROP TABLE "axis_checkpoint"`);
    await queryRunner.query(
      `CREATE TABLE "axis_checkpoint" ("axisId" integer PRIMARY KEY NOT NULL, "state" blob NOT NULL) WITHOUT ROWID`,
    );
    for (const axisId of new Set(parts.map((row) => row.axisId))) {
      const [judgement, ...arrays] = parts.filter((row) => row.axisId === axisId).map(({ state }) => state);
      const length = Buffer.alloc(4);
      length.writeUInt32LE(judgement!.byteLength);
      await queryRunner.query(`INSERT INTO "axis_checkpoint" ("axisId", "state") VALUES (?, ?)`, [
        axisId,
        Buffer.concat([length, judgement!, ...arrays]),
      ]);
    }
  }
}
