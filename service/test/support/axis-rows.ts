import Database from 'better-sqlite3';

/** Tables that the intake fills, one row a stretch of an axis. */
const TABLES = [
  'indicator_second',
  'indicator_minute',
  'indicator_hour',
  'move_record',
  'plant_estimate_row',
];

type Row = Record<string, unknown>;

/**
 * All that the intake wrote of an axis, to compare bit for bit with another axis or another database: SQLite keeps
 * the eight bytes of a double, and blobs are compared whole.
 */
export function axisRows(path: string, axisId: number): Record<string, Row[]> {
  const database = new Database(path, { readonly: true });
  try {
    const rows = (table: string, order: string): Row[] =>
      (
        database.prepare(`SELECT * FROM "${table}" WHERE "axisId" = ? ORDER BY ${order}`).all(axisId) as Row[]
      ).map(({ id: _, axisId: __, ...row }) => row);
    return Object.fromEntries([
      ...TABLES.map((table) => [table, rows(table, '"t"')]),
      ['axis_checkpoint', rows('axis_checkpoint', '"part"')],
      // A crash is a silence of its own, by the service's clock; all other rules look at what samples say.
      [
        'alert',
        rows('alert', '"rule"')
          .filter(({ rule }) => rule !== 'no-signal')
          .map(({ rule, priority, state }) => ({ rule, priority, state })),
      ],
    ]);
  } finally {
    database.close();
  }
}
