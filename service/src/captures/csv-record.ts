import { parse } from 'csv-parse';
import { createReadStream } from 'node:fs';
import { open } from 'node:fs/promises';
import { pipeline } from 'node:stream/promises';
import { TextDecoderStream } from 'node:stream/web';
import { Readable } from 'node:stream';
import type { CaptureMapping } from './capture.entity.js';
import { CaptureProblem, gridOf, type GriddedRecord, type Rows } from './sample-grid.js';

/** Bytes that are looked at to find out what a file is. */
const HEAD = 65_536;
/** Rows that are read: 50 minutes at 1 kHz, and bounded memory whatever the file. */
const MOST_ROWS = 3_000_000;

const DELIMITERS = [',', ';', '\t'] as const;
const TIME = { s: 1, ms: 1e-3, us: 1e-6 } as const;
const POSITION = { mm: 1, um: 1e-3, m: 1000, in: 25.4 } as const;
const OUTPUT = { percent: 1, fraction: 100, volts10: 10 } as const;

/** What the head of a file shows. */
export interface FileHead {
  encoding: 'utf-8' | 'utf-16le' | 'utf-16be';
  delimiter: (typeof DELIMITERS)[number];
  columns: string[];
  /** Decimal commas: numbers such as 1,25 in a file that separates by something else. */
  decimalComma: boolean;
}

/**
 * Finds out encoding, delimiter and header of a CSV file (RFC 4180 with a header row).
 *
 * @throws CaptureProblem when it is empty, packed, binary or has one column only
 */
export async function readHead(path: string): Promise<FileHead> {
  const file = await open(path);
  let bytes: Buffer;
  try {
    const { buffer, bytesRead } = await file.read(Buffer.alloc(HEAD), 0, HEAD, 0);
    bytes = buffer.subarray(0, bytesRead);
  } finally {
    await file.close();
  }
  if (bytes.length === 0) throw new CaptureProblem('the file is empty');
  if (bytes.readUInt16BE(0) === 0x504b || bytes.readUInt16BE(0) === 0x1f8b)
    throw new CaptureProblem(
      'the file is packed, whatever its name says: unpack it and upload the CSV inside',
    );
  const encoding =
    bytes[0] === 0xff && bytes[1] === 0xfe
      ? 'utf-16le'
      : bytes[0] === 0xfe && bytes[1] === 0xff
        ? 'utf-16be'
        : 'utf-8';
  if (encoding === 'utf-8' && bytes.includes(0)) throw new CaptureProblem('the file is binary, not CSV text');
  const text = new TextDecoder(encoding).decode(bytes);
  const [header = '', ...rows] = text.split(/\r\n|\n|\r/);
  const count = (line: string, sign: string): number => line.split(sign).length - 1;
  const delimiter = DELIMITERS.reduce((best, sign) =>
    count(header, sign) > count(header, best) ? sign : best,
  );
  const columns = header.split(delimiter).map((name) =>
    name
      .trim()
      .replace(/^"(.*)"$/, '$1')
      .trim(),
  );
  if (columns.length < 2)
    throw new CaptureProblem(
      'the file has one column only: time, position and output must be columns of their own, with their names in the first row',
    );
  if (columns.every((name) => name !== '' && Number.isFinite(Number(name.replace(',', '.')))))
    throw new CaptureProblem('the first row holds numbers: it must hold the names of the columns');
  const decimalComma = delimiter !== ',' && rows.slice(0, 50).some((row) => /\d,\d/.test(row));
  return { encoding, delimiter, columns, decimalComma };
}

/** Where the columns of a mapping are. @throws CaptureProblem naming the field whose column is not there */
export function mappedColumns(head: FileHead, mapping: CaptureMapping): Record<string, number> {
  const found: Record<string, number> = {};
  for (const name of ['time', 'target', 'position', 'output'] as const) {
    const column = mapping[name];
    if (column === undefined) continue;
    const at = head.columns.indexOf(column);
    if (at < 0)
      throw new CaptureProblem(
        `there is no column "${column}" for ${name}; the file has ${head.columns.map((c) => `"${c}"`).join(', ')}`,
        `mapping.${name}`,
      );
    found[name] = at;
  }
  return found;
}

/**
 * Reads a CSV file as a stream onto a uniform grid, in mm, s and %.
 *
 * @throws CaptureProblem naming row and column of what cannot be used
 */
export async function readCsvRecord(
  path: string,
  mapping: CaptureMapping,
  mostRows = MOST_ROWS,
): Promise<GriddedRecord> {
  const head = await readHead(path);
  const at = mappedColumns(head, mapping);
  const { units = {} } = mapping;
  const timeUnit = TIME[units.time ?? 's'];
  const positionUnit = POSITION[units.position ?? 'mm'];
  const outputUnit = OUTPUT[units.output ?? 'percent'];
  const rows = new RowBuffer(at.target !== undefined);
  const cell = (row: string[], name: string, line: number): number => {
    const text = row[at[name]!]!.trim();
    if (text === '' || /^nan$/i.test(text)) return NaN;
    const value = Number(head.decimalComma ? text.replace(',', '.') : text);
    if (!Number.isFinite(value))
      throw new CaptureProblem(
        `row ${line}, column "${head.columns[at[name]!]}": "${text.slice(0, 40)}" is not a number`,
      );
    return value;
  };
  let line = 1;
  const parser = parse({
    bom: true,
    delimiter: head.delimiter,
    from_line: 2,
    relax_column_count: true,
    skip_empty_lines: true,
    trim: true,
  });
  // A pipeline that is given up says that it was aborted; why is kept here.
  let refusal: CaptureProblem | null = null;
  const take = async (records: AsyncIterable<string[]>): Promise<void> => {
    for await (const row of records) {
      line++;
      try {
        takeRow(row);
      } catch (error) {
        if (error instanceof CaptureProblem) refusal = error;
        throw error;
      }
    }
  };
  const takeRow = (row: string[]): void => {
    if (row.length !== head.columns.length)
      throw new CaptureProblem(
        `row ${line} has ${row.length} columns, the header has ${head.columns.length}`,
      );
    if (rows.length === mostRows)
      throw new CaptureProblem(
        `the file has more than ${mostRows.toLocaleString('en-GB')} rows: cut it into shorter captures`,
      );
    const time = cell(row, 'time', line) * timeUnit;
    if (Number.isNaN(time)) throw new CaptureProblem(`row ${line} has no time`);
    rows.add(
      time,
      cell(row, 'position', line) * positionUnit,
      cell(row, 'output', line) * outputUnit,
      at.target === undefined ? NaN : cell(row, 'target', line) * positionUnit,
    );
  };
  const text = Readable.toWeb(createReadStream(path)).pipeThrough(
    new TextDecoderStream(head.encoding, { fatal: true }),
  );
  try {
    await pipeline(Readable.fromWeb(text), parser, take);
  } catch (error) {
    if (refusal) throw refusal;
    if (
      (error as { code?: string }).code === 'ERR_ENCODING_INVALID_ENCODED_DATA' ||
      error instanceof TypeError
    )
      throw new CaptureProblem('the file is not UTF-8 text: save it as UTF-8 CSV');
    throw new CaptureProblem(`row ${line + 1} cannot be read as CSV: ${(error as Error).message}`);
  }
  return gridOf(rows.take());
}

/** Rows as growing typed arrays. */
class RowBuffer {
  length = 0;
  private columns: Float64Array[];

  constructor(private readonly withTarget: boolean) {
    this.columns = Array.from({ length: 4 }, () => new Float64Array(65_536));
  }

  add(time: number, position: number, output: number, target: number): void {
    if (this.length === this.columns[0]!.length)
      this.columns = this.columns.map((column) => {
        const longer = new Float64Array(column.length * 2);
        longer.set(column);
        return longer;
      });
    const [times, positions, outputs, targets] = this.columns as [
      Float64Array,
      Float64Array,
      Float64Array,
      Float64Array,
    ];
    times[this.length] = time;
    positions[this.length] = position;
    outputs[this.length] = output;
    targets[this.length] = target;
    this.length++;
  }

  take(): Rows {
    const [time, position, output, target] = this.columns.map((column) => column.subarray(0, this.length));
    return { time: time!, position: position!, output: output!, ...(this.withTarget && { target: target! }) };
  }
}
