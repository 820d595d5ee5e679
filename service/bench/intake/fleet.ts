import Database from 'better-sqlite3';
import { createHash } from 'node:crypto';
import { mkdtempSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { startProcess } from '../../test/support/service-process.js';

/** Axes of one load gateway. */
export const AXES_PER_GATEWAY = 100;

/** A data folder whose database holds a fleet; `gateways` are what its load processes sign in with. */
export interface BenchFleet {
  folder: string;
  axisIds: number[];
  gateways: { token: string; tags: string[] }[];
}

/**
 * Makes a fleet of `count` axes at 1 kHz: the demo's first axis, copied. The service makes the schema, the rows are
 * written while it is down, because registering thousands of axes by the API is not what is measured.
 */
export async function makeFleet(count: number): Promise<BenchFleet> {
  const folder = mkdtempSync(join(tmpdir(), 'polewright-bench-'));
  await (await startProcess(folder)).stop();
  const database = new Database(join(folder, 'polewright.sqlite'));
  const gateways: BenchFleet['gateways'] = [];
  const axisIds: number[] = [];
  database.transaction(() => {
    const axis = database.prepare(`SELECT * FROM "axis" ORDER BY "id" LIMIT 1`).get() as Row;
    const tuning = database.prepare(`SELECT * FROM "tuning_revision" WHERE "axisId" = ?`).get(axis.id) as Row;
    for (let first = 0; first < count; first += AXES_PER_GATEWAY) {
      const token = `bench-${first}`;
      insert(database, 'gateway', {
        siteId: axis.siteId,
        name: token,
        tokenHash: createHash('sha256').update(token).digest('hex'),
      });
      const tags: string[] = [];
      for (let k = first; k < Math.min(count, first + AXES_PER_GATEWAY); k++) {
        const { id: _, ...sheet } = axis;
        const tag = `B-${k}`;
        const axisId = insert(database, 'axis', { ...sheet, tag, sampleTime: 0.001, revision: 1 });
        const { id: __, ...gains } = tuning;
        insert(database, 'tuning_revision', { ...gains, axisId, revision: 1 });
        tags.push(tag);
        axisIds.push(axisId);
      }
      gateways.push({ token, tags });
    }
  })();
  database.close();
  return { folder, axisIds, gateways };
}

type Row = Record<string, unknown>;

function insert(database: Database.Database, table: string, row: Row): number {
  const columns = Object.keys(row);
  return Number(
    database
      .prepare(
        `INSERT INTO "${table}" (${columns.map((c) => `"${c}"`).join(', ')}) VALUES (${columns.map(() => '?').join(', ')})`,
      )
      .run(...Object.values(row)).lastInsertRowid,
  );
}
