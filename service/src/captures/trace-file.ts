import { readFile, rename, writeFile } from 'node:fs/promises';

/** Columns of a capture on its grid: mm, mm, %, mm/s, mm/s, mm. NaN where there is nothing. */
export const TRACE_COLUMNS = [
  'target',
  'position',
  'output',
  'velocity',
  'simulatedVelocity',
  'residual',
] as const;
export type TraceColumn = (typeof TRACE_COLUMNS)[number];

export interface CaptureTrace {
  sampleTime: number;
  length: number;
  columns: Record<TraceColumn, Float32Array>;
}

/** Sample time and length, then the columns one after another, little-endian as the machine is. */
export async function writeTrace(path: string, { sampleTime, length, columns }: CaptureTrace): Promise<void> {
  const head = Buffer.from(Float64Array.of(sampleTime, length).buffer);
  const parts = TRACE_COLUMNS.map((name) => {
    const { buffer, byteOffset, byteLength } = columns[name];
    return Buffer.from(buffer, byteOffset, byteLength);
  });
  // Written beside and moved, so that a trace is whole or not there.
  await writeFile(`${path}.part`, Buffer.concat([head, ...parts]));
  await rename(`${path}.part`, path);
}

export async function readTrace(path: string): Promise<CaptureTrace> {
  const bytes = await readFile(path);
  const [sampleTime, length] = [bytes.readDoubleLE(0), bytes.readDoubleLE(8)];
  const at = (i: number): Float32Array => {
    const from = 16 + 4 * length * i;
    return new Float32Array(
      bytes.buffer.slice(bytes.byteOffset + from, bytes.byteOffset + from + 4 * length),
    );
  };
  return {
    sampleTime,
    length,
    columns: Object.fromEntries(TRACE_COLUMNS.map((name, i) => [name, at(i)])) as CaptureTrace['columns'],
  };
}

/**
 * Indices of at most about `points` samples that keep every extreme: of each stretch the samples with the least and
 * the largest output, which jumps most.
 */
export function thinnedIndices({ length, columns }: CaptureTrace, points: number): number[] {
  if (length <= points) return Array.from({ length }, (_, i) => i);
  const stretch = Math.ceil((2 * length) / points);
  const { output } = columns;
  const kept: number[] = [];
  for (let from = 0; from < length; from += stretch) {
    const to = Math.min(length, from + stretch);
    let least = from;
    let most = from;
    for (let i = from; i < to; i++) {
      if (output[i]! < output[least]!) least = i;
      if (output[i]! > output[most]!) most = i;
    }
    kept.push(Math.min(least, most));
    if (least !== most) kept.push(Math.max(least, most));
  }
  return kept;
}
