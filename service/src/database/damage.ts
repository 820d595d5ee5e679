import Database from 'better-sqlite3';
import { existsSync } from 'node:fs';
import { backupFolder, backupsIn } from './backup.service.js';

/**
 * Looks whether the database file can be opened at all, before anything else does, and alters nothing. A page damaged
 * deeper inside shows only to whoever reads it.
 *
 * @returns in plain words what is wrong and what to do; null when the file is readable or not there yet
 */
export function damageOf(database: string, dataDir: string): string | null {
  if (!existsSync(database)) return null;
  let opened: Database.Database | undefined;
  try {
    opened = new Database(database, { timeout: 10_000 });
    opened.prepare('SELECT count(*) FROM "sqlite_master"').get();
    return null;
  } catch (error) {
    const [newest] = backupsIn(backupFolder(dataDir));
    return [
      `The database ${database} cannot be read (${(error as Error).message}). Nothing was changed.`,
      newest
        ? `The newest backup is ${newest.path}. To put it in its place: npm run restore -- ${newest.path}`
        : `There is no backup in ${backupFolder(dataDir)}.`,
    ].join('\n');
  } finally {
    opened?.close();
  }
}
