import Database from 'better-sqlite3';
import { existsSync } from 'node:fs';
import { join, resolve } from 'node:path';
import { verifyChain, type StoredEntry } from './chain.js';

/** Entries that are read at once. */
const BATCH = 1_000;

/** Batches of the record, read without altering the file. */
function* batchesOf(database: Database.Database): Generator<StoredEntry[]> {
  const query = database.prepare('SELECT * FROM "audit_entry" WHERE "id" > ? ORDER BY "id" LIMIT ?');
  for (let lastId = 0; ;) {
    const batch = query.all(lastId, BATCH) as StoredEntry[];
    if (batch.length === 0) return;
    yield batch;
    lastId = batch.at(-1)!.id;
  }
}

/**
 * `npm run verify-record [database]`: walks the record of a database file, also beside a running service.
 *
 * @returns the exit code: 0 intact, 1 broken, 2 no record there
 */
export async function verifyRecord(path: string, say: (line: string) => void): Promise<number> {
  if (!existsSync(path)) {
    say(`There is no database at ${path}. Name one, or set DATA_DIR.`);
    return 2;
  }
  const database = new Database(path, { readonly: true });
  try {
    // One read transaction: what a running service writes meanwhile does not show.
    database.exec('BEGIN');
    const given = database
      .prepare(`SELECT "seq" FROM "sqlite_sequence" WHERE "name" = 'audit_entry'`)
      .get() as { seq: number } | undefined;
    const report = await verifyChain(batchesOf(database), given?.seq ?? 0);
    if (report.intact) {
      say(`The record is intact: ${report.entries} entries. Head ${report.head}`);
      return 0;
    }
    say(`The record is broken at entry ${report.brokenAt}: ${report.reason}.`);
    if (report.broken) say(`It reads now: ${JSON.stringify(report.broken)}`);
    say(`Good entries before it: ${report.entries}. Last good hash ${report.head}`);
    return 1;
  } catch (error) {
    say(`The record at ${path} cannot be read: ${(error as Error).message}`);
    return 2;
  } finally {
    database.close();
  }
}

if (process.argv[1]?.endsWith('verify-record.js'))
  process.exitCode = await verifyRecord(
    resolve(process.argv[2] ?? join(process.env.DATA_DIR ?? 'data', 'polewright.sqlite')),
    (line) => console.log(line),
  );
