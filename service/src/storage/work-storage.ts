import Database from 'better-sqlite3';
import { existsSync, readdirSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { faultOf } from '../database/integrity.js';
import { KIND_OF } from './retention.js';

/** What is measured as a table is, though it is files. */
export const CAPTURE_FILES = 'capture files';

export interface TableSize {
  name: string;
  rows: number;
  /** Of its pages and its indices' pages. */
  bytes: number;
  /** s since the Unix epoch; null for tables that are kept without end. */
  oldest: number | null;
}

export type StorageJob =
  | { measure: { database: string; captures: string } }
  /** Path of a database file. */
  | { check: string };

export type StorageAnswer = { sizes: TableSize[] } | { fault: string | null };

/** What the storage thread does for a job. */
export const workStorage = (job: StorageJob): StorageAnswer =>
  'check' in job
    ? { fault: faultOf(job.check) }
    : { sizes: [...tableSizes(job.measure.database), fileSizes(job.measure.captures)] };

/**
 * Rows and bytes of every table. SQLite's table of its own pages (https://www.sqlite.org/dbstat.html) gives both in one
 * reading of the file: rows are the cells of a table's leaves, and of its inner pages too where it has no row id.
 */
function tableSizes(path: string): TableSize[] {
  const database = new Database(path, { readonly: true });
  try {
    const sizes = database
      .prepare(
        `SELECT m."tbl_name" AS "name", sum(s."pgsize") AS "bytes",
                sum(CASE WHEN m."type" = 'table' AND (s."pagetype" = 'leaf' OR l."wr") THEN s."ncell" ELSE 0 END) AS "rows"
         FROM "dbstat" s JOIN "sqlite_master" m ON m."name" = s."name"
         JOIN pragma_table_list l ON l."name" = m."tbl_name" AND l."schema" = 'main'
         WHERE m."tbl_name" NOT LIKE 'sqlite_%'
         GROUP BY m."tbl_name" ORDER BY "bytes" DESC, m."tbl_name"`,
      )
      .all() as Omit<TableSize, 'oldest'>[];
    return sizes.map((size) => ({
      ...size,
      oldest: size.name in KIND_OF ? oldestOf(database, size.name) : null,
    }));
  } finally {
    database.close();
  }
}

/** One seek in the primary key of each axis. */
const oldestOf = (database: Database.Database, table: string): number | null =>
  database
    .prepare(
      `SELECT min((SELECT "t" FROM "${table}" WHERE "axisId" = a."id" ORDER BY "t" LIMIT 1)) FROM "axis" a`,
    )
    .pluck()
    .get() as number | null;

function fileSizes(folder: string): TableSize {
  const files = existsSync(folder) ? readdirSync(folder, { withFileTypes: true }) : [];
  let rows = 0;
  let bytes = 0;
  for (const file of files) {
    const found = file.isFile() && statSync(join(folder, file.name), { throwIfNoEntry: false });
    if (!found) continue;
    rows++;
    bytes += found.size;
  }
  return { name: CAPTURE_FILES, rows, bytes, oldest: null };
}
