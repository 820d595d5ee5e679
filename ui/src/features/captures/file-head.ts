import { parse } from 'csv-parse/browser/esm/sync';

/** The beginning of a CSV file, for the mapping; the service reads the file itself and decides. */
export interface FileHead {
  columns: string[];
  rows: string[][];
}

const HEAD_BYTES = 65_536;
const PREVIEW_ROWS = 5;

/** Columns and first rows of a file. @throws Error in words when there is nothing like a table */
export async function readFileHead(file: File): Promise<FileHead> {
  const bytes = new Uint8Array(await file.slice(0, HEAD_BYTES).arrayBuffer());
  const encoding = bytes[0] === 0xff && bytes[1] === 0xfe ? 'utf-16le' : 'utf-8';
  // The last line of a part of a file is a part of a line.
  const lines = new TextDecoder(encoding).decode(bytes).split(/\r\n|\n|\r/);
  const whole = lines.length > 1 && file.size > HEAD_BYTES ? lines.slice(0, -1) : lines;
  const header = whole[0] ?? '';
  const delimiter = [',', ';', '\t'].reduce((best, sign) =>
    header.split(sign).length > header.split(best).length ? sign : best,
  );
  const table = parse(whole.slice(0, PREVIEW_ROWS + 1).join('\n'), {
    bom: true,
    delimiter,
    relax_column_count: true,
    skip_empty_lines: true,
    trim: true,
  }) as string[][];
  const [columns = [], ...rows] = table;
  if (columns.length < 2)
    throw new Error('This does not look like a CSV file with a row of names and at least two columns.');
  return { columns, rows };
}

const HINTS = {
  time: /^(t|time|zeit|timestamp)|time/i,
  target: /target|setpoint|set.?point|reference|demand|soll/i,
  position: /pos|actual|encoder|^y$|ist/i,
  output: /out|command|^u$|volt|control|stell/i,
} as const;

/** A first guess of which column is which, by their names. */
export function guessMapping(columns: readonly string[]): Record<keyof typeof HINTS, string | null> {
  const taken = new Set<string>();
  const find = (name: keyof typeof HINTS): string | null => {
    const found = columns.find((column) => !taken.has(column) && HINTS[name].test(column)) ?? null;
    if (found) taken.add(found);
    return found;
  };
  return { time: find('time'), target: find('target'), position: find('position'), output: find('output') };
}

/** A unit that the name of a column tells, such as `time_ms`. */
export function guessUnit<T extends string>(column: string | null, units: readonly T[], usual: T): T {
  const words = column?.toLowerCase().split(/[^a-zµ]+/) ?? [];
  return units.find((unit) => words.includes(unit)) ?? usual;
}
