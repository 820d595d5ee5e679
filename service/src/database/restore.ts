import Database from 'better-sqlite3';
import { copyFileSync, existsSync, renameSync, rmSync } from 'node:fs';
import { join, resolve } from 'node:path';
import { faultOf } from './integrity.js';

/** What SQLite keeps beside a database file. */
const BESIDE = ['-wal', '-shm'];

/**
 * `npm run restore -- <backup>`: puts a backup in the place of the data folder's database. The former database is
 * moved aside, never overwritten.
 *
 * @returns the exit code: 0 restored, 1 refused and nothing changed
 */
export function restore(
  backup: string,
  database: string,
  say: (line: string) => void,
  now = new Date(),
): number {
  const fault = faultOf(backup);
  if (fault) {
    say(`${backup} is not restored: ${fault}.`);
    return 1;
  }
  if (existsSync(database)) {
    if (isInUse(database)) {
      say(`The database ${database} is in use. Stop the service first.`);
      return 1;
    }
    const aside = `${database}.before-${now.toISOString().slice(0, 19).replaceAll(':', '-')}`;
    if (existsSync(aside)) {
      say(`${aside} is already there.`);
      return 1;
    }
    // The log first: with it alone left behind, the next database would be read through it.
    for (const end of BESIDE) if (existsSync(database + end)) renameSync(database + end, aside + end);
    renameSync(database, aside);
    say(`The former database is kept as ${aside}`);
  }
  const part = `${database}.part`;
  rmSync(part, { force: true });
  copyFileSync(backup, part);
  renameSync(part, database);
  say(`Restored ${backup}. Gateways send again what they still hold from there on.`);
  return 0;
}

/** Leaving the write-ahead log takes the only connection there is; a damaged file cannot be in use by a service. */
function isInUse(path: string): boolean {
  let opened: Database.Database | undefined;
  try {
    opened = new Database(path, { timeout: 0 });
    opened.pragma('journal_mode = DELETE');
    return false;
  } catch (error) {
    return String((error as { code?: string }).code).startsWith('SQLITE_BUSY');
  } finally {
    opened?.close();
  }
}

if (process.argv[1]?.endsWith('restore.js')) {
  if (process.argv[2] === undefined) {
    console.log('Name the backup: npm run restore -- <file>. They are in the folder "backups" of DATA_DIR.');
    process.exitCode = 1;
  } else
    process.exitCode = restore(
      resolve(process.argv[2]),
      resolve(join(process.env.DATA_DIR ?? 'data', 'polewright.sqlite')),
      (line) => console.log(line),
    );
}
