/** What one table, or the folder of captures, holds and how it grows. */
export interface Grown {
  name: string;
  rows: number;
  bytes: number;
  /** Rows a day over `GROWTH_REACH`, less what was deleted; null until there is a day of measurements. */
  rowsPerDay: number | null;
  /** Days until its oldest row is as old as rows are kept; from then on it grows no more. Infinity without an end. */
  growsForDays: number;
}

export interface Measured {
  /** s since the Unix epoch */
  t: number;
  rows: number;
}

const DAY = 86_400;
/** Growth is that of the last two weeks, s: two of a works' weeks, week-ends in them (common practice, no source). */
export const GROWTH_REACH = 14 * DAY;
/** Shortest span of measurements that says anything of a day, s. */
export const LEAST_SPAN = DAY;
/** How far ahead is looked, days. */
const HORIZON = 3_650;

/**
 * Rows a day by the least-squares line through the measurements of the last `GROWTH_REACH`:
 * Σ (tᵢ − t̄)(rᵢ − r̄) / Σ (tᵢ − t̄)², with t in days.
 *
 * @param measured oldest first
 * @returns null when they span less than `LEAST_SPAN`
 */
export function rowsPerDay(measured: readonly Measured[]): number | null {
  const newest = measured.at(-1);
  if (!newest) return null;
  const used = measured.filter(({ t }) => t >= newest.t - GROWTH_REACH);
  if (newest.t - used[0]!.t < LEAST_SPAN) return null;
  const meanT = used.reduce((sum, { t }) => sum + t, 0) / used.length;
  const meanRows = used.reduce((sum, { rows }) => sum + rows, 0) / used.length;
  let above = 0;
  let below = 0;
  for (const { t, rows } of used) {
    above += ((t - meanT) / DAY) * (rows - meanRows);
    below += ((t - meanT) / DAY) ** 2;
  }
  return above / below;
}

/**
 * Bytes that the tables will have got in so many days: each grows by its rows a day at its bytes a row until it holds
 * all that is kept. A table that shrinks counts as level: SQLite keeps the freed pages in its file and fills them again.
 */
export const grownBytes = (tables: readonly Grown[], days: number): number =>
  tables.reduce(
    (sum, { rows, bytes, rowsPerDay, growsForDays }) =>
      sum + (rows > 0 ? Math.max(0, rowsPerDay ?? 0) * (bytes / rows) * Math.min(days, growsForDays) : 0),
    0,
  );

/**
 * In how many days the disk is full, when each backup is as large as the database is then and `backupsKept` of them are
 * kept: the first d with (1 + backupsKept)·(database + grown(d)) + captures(d) − used now > free.
 *
 * @param of bytes: the database, its backups so far, and what is free now
 * @returns whole days; 0 when the backups that are still to be made do not fit as it is; null beyond ten years
 */
export function fullInDays(
  tables: readonly Grown[],
  captures: Grown,
  of: { database: number; backups: number; free: number; backupsKept: number },
): number | null {
  const wanted = (days: number): number =>
    (1 + of.backupsKept) * (of.database + grownBytes(tables, days)) -
    of.database -
    of.backups +
    grownBytes([captures], days);
  if (wanted(HORIZON) <= of.free) return null;
  let enough = -1;
  let full = HORIZON;
  // What is wanted never falls, so the first day can be sought by halving.
  while (full - enough > 1) {
    const middle = Math.floor((enough + full) / 2);
    if (wanted(middle) > of.free) full = middle;
    else enough = middle;
  }
  return full;
}
