import { parse } from 'csv-parse/sync';
import dayjs from 'dayjs';
import { csvText } from '../csv-text.js';
import type { FieldProblem } from '../problem.filter.js';
import { localInstant, type Shift } from './shifts.js';

const HEAD = ['from', 'to', 'name', 'email', 'by', 'reason'] as const;
const NEEDED = ['from', 'to', 'email'] as const;
/** Lines of a file: a year of shifts of eight hours and some. */
const MOST_LINES = 1_500;
const LONGEST_REASON = 500;

/** Somebody stands in, as a line of a file has it. */
export interface CsvLine {
  line: number;
  from: Date;
  to: Date;
  email: string;
  reason: string;
}

/**
 * Shifts as CSV (RFC 4180, header row): times on the site's clock with their offset from UTC, name and mail address of
 * who is on call, the layer that says so or "override".
 */
export const shiftsCsv = (
  shifts: readonly Shift[],
  zone: string,
  personOf: (id: number) => { name: string; email: string } | undefined,
): string =>
  csvText([
    HEAD,
    ...shifts.map(({ from, to, userId, layer }) => {
      const person = personOf(userId);
      const clock = (at: Date): string => dayjs(at).tz(zone).format('YYYY-MM-DDTHH:mm:ssZ');
      return [
        clock(from),
        clock(to),
        person?.name ?? `Person ${userId}`,
        person?.email ?? null,
        layer ?? 'override',
        null,
      ];
    }),
  ]);

/**
 * A time of a line: ISO 8601 with its offset, or without one on the site's clock, date and time apart by a "T" or a space.
 *
 * @returns null when it is none, or a day that does not exist
 */
function timeOf(text: string, zone: string): Date | null {
  const parts = /^(\d{4}-\d{2}-\d{2})[T ](\d{2}:\d{2})(:\d{2}(?:\.\d+)?)?(Z|[+-]\d{2}:\d{2})?$/.exec(text);
  if (!parts) return null;
  const [, date, clock, seconds = ':00', offset] = parts;
  const wall = new Date(`${date}T${clock}${seconds}Z`);
  if (Number.isNaN(wall.getTime()) || !wall.toISOString().startsWith(`${date}T${clock}`)) return null;
  if (!offset) return localInstant(date!, clock!, zone);
  const at = new Date(`${date}T${clock}${seconds}${offset}`);
  return Number.isNaN(at.getTime()) ? null : at;
}

/**
 * Reads lines of people who stand in. The export's own form is understood; its columns `name` and `by` say nothing new
 * and are passed over.
 *
 * @returns the good lines, and for each bad one what is wrong with it: `line 3`
 */
export function readRotaCsv(text: string, zone: string): { lines: CsvLine[]; problems: FieldProblem[] } {
  const file = (message: string) => ({ lines: [], problems: [{ path: 'file', message }] });
  let rows: { record: string[]; info: { lines: number } }[];
  try {
    rows = parse(text, {
      bom: true,
      delimiter: [',', ';', '\t'],
      trim: true,
      skip_empty_lines: true,
      relax_column_count: true,
      info: true,
    }) as unknown as typeof rows;
  } catch (error) {
    return file(`is not CSV: ${(error as Error).message}`);
  }
  const [head, ...body] = rows;
  if (!head) return file('is empty');
  const columns = head.record.map((name) => name.toLowerCase());
  const missing = NEEDED.filter((name) => !columns.includes(name));
  if (missing.length > 0)
    return file(`has no column ${missing.join(', ')}; the first line names the columns`);
  const unknown = columns.filter((name) => !(HEAD as readonly string[]).includes(name));
  if (unknown.length > 0) return file(`has columns that are not known: ${unknown.join(', ')}`);
  if (body.length === 0) return file('has no line under its header');
  if (body.length > MOST_LINES) return file(`has ${body.length} lines; ${MOST_LINES} are taken at once`);
  const lines: CsvLine[] = [];
  const problems: FieldProblem[] = [];
  for (const { record, info } of body) {
    const cell = (name: (typeof HEAD)[number]): string => record[columns.indexOf(name)] ?? '';
    const from = timeOf(cell('from'), zone);
    const to = timeOf(cell('to'), zone);
    const reason = cell('reason') || 'From a file';
    const wrong = [
      ...(record.length === columns.length
        ? []
        : [`${record.length} fields where the header has ${columns.length}`]),
      ...(from ? [] : [`from "${cell('from')}" is no time such as 2027-01-04 06:00`]),
      ...(to ? [] : [`to "${cell('to')}" is no time such as 2027-01-04 06:00`]),
      ...(cell('email') ? [] : ['email is missing']),
      ...(reason.length > LONGEST_REASON ? [`reason is longer than ${LONGEST_REASON} signs`] : []),
    ];
    const before = from && to && lines.find((other) => other.from < to && other.to > from);
    if (before) wrong.push(`overlaps line ${before.line}`);
    if (from && to && wrong.length === 0)
      lines.push({ line: info.lines, from, to, email: cell('email').toLowerCase(), reason });
    else problems.push({ path: `line ${info.lines}`, message: wrong.join('; ') });
  }
  return { lines, problems };
}
