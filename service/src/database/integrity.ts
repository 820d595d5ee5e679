import Database from 'better-sqlite3';
import { existsSync } from 'node:fs';

/**
 * What is wrong with a database of this service: every page and index of it is read, which takes a minute for some
 * gigabytes; null when it is whole. Beside a working service it sees one state of the file and delays no writer.
 */
export function faultOf(path: string): string | null {
  if (!existsSync(path)) return 'there is no such file';
  let opened: Database.Database | undefined;
  try {
    opened = new Database(path, { readonly: true });
    const [first] = opened.prepare('PRAGMA integrity_check').pluck().all() as string[];
    if (first !== 'ok') return `its integrity check says: ${first}`;
    const known = opened
      .prepare(`SELECT count(*) FROM "sqlite_master" WHERE "name" IN ('migrations', 'axis', 'gateway')`)
      .pluck()
      .get();
    return known === 3 ? null : 'it is a database, but not of this service';
  } catch (error) {
    return `it cannot be read (${(error as Error).message})`;
  } finally {
    opened?.close();
  }
}
