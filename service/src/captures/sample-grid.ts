import type { MotionRecord } from '../identification/motion-record.js';

/** What is wrong with a capture, in words for the person who brought it; `path` names the field of a request. */
export class CaptureProblem extends Error {
  constructor(
    message: string,
    readonly path = 'file',
  ) {
    super(message);
  }
}

/** Rows as they were read: s, mm, %, mm. NaN where a cell is empty. */
export interface Rows {
  time: Float64Array;
  position: Float64Array;
  output: Float64Array;
  target?: Float64Array;
}

export interface GriddedRecord extends MotionRecord {
  /** What had to be done to get there, in words. */
  remarks: string[];
}

/** Sample times that an axis can be identified from, s. */
const SHORTEST = 1e-5;
const LONGEST = 0.1;
const LEAST_SAMPLES = 50;
/** A time this far from the grid, in samples, is still on it. */
const ON_GRID = 0.25;
/** Share of times beside the grid from which on the record is resampled. */
const UNEVEN = 0.01;
/** Share of missing samples from which on it is refused. */
const MOST_MISSING = 0.3;
/** Longest hole that resampling fills, samples. */
const LONGEST_FILL = 3;

/**
 * Puts rows onto a uniform grid of their median step: rows that lie on it go where they belong and holes stay NaN;
 * rows beside it are resampled, positions linearly, outputs as held since the row before.
 *
 * @throws CaptureProblem when the times do not allow it
 */
export function gridOf({ time, position, output, target }: Rows): GriddedRecord {
  const n = time.length;
  if (n < LEAST_SAMPLES)
    throw new CaptureProblem(`the file has ${n} rows of samples: at least ${LEAST_SAMPLES} are needed`);
  const steps = new Float64Array(n - 1);
  for (let i = 1; i < n; i++) {
    const step = time[i]! - time[i - 1]!;
    if (!(step > 0))
      throw new CaptureProblem(
        `row ${i + 2}: the time does not increase (${time[i - 1]} s, then ${time[i]} s)`,
      );
    steps[i - 1] = step;
  }
  const median = steps.sort()[steps.length >> 1]!;
  const span = time[n - 1]! - time[0]!;
  const count = Math.round(span / median) + 1;
  const sampleTime = span / (count - 1);
  if (sampleTime < SHORTEST || sampleTime > LONGEST)
    throw new CaptureProblem(
      `the samples are ${sampleTime.toPrecision(3)} s apart; between ${SHORTEST} and ${LONGEST} s are needed. Is the unit of the time right?`,
      'mapping.units.time',
    );
  const missing = 1 - n / count;
  if (missing > MOST_MISSING)
    throw new CaptureProblem(
      `${(100 * missing).toFixed(0)} % of the samples are missing (${n} rows over ${span.toPrecision(3)} s at ${sampleTime.toPrecision(3)} s): too many to work with`,
    );
  let beside = 0;
  for (let i = 0; i < n; i++) {
    const at = (time[i]! - time[0]!) / sampleTime;
    if (Math.abs(at - Math.round(at)) > ON_GRID) beside++;
  }
  const uneven = beside > UNEVEN * n;
  const place = (values: Float64Array, held: boolean): Float64Array =>
    uneven ? resampled(time, values, sampleTime, count, held) : placed(time, values, sampleTime, count);
  const remarks: string[] = [];
  if (uneven)
    remarks.push(`the sample times are uneven: resampled every ${(1000 * sampleTime).toPrecision(3)} ms`);
  else if (count > n) remarks.push(`${count - n} of ${count} samples are missing`);
  const record = {
    sampleTime,
    position: place(position, false),
    output: place(output, true),
    ...(target && { target: place(target, false) }),
    remarks,
  };
  if (isConstant(record.output)) remarks.push('the output never changes');
  return record;
}

function placed(time: Float64Array, values: Float64Array, sampleTime: number, count: number): Float64Array {
  const grid = new Float64Array(count).fill(NaN);
  for (let i = 0; i < time.length; i++) grid[Math.round((time[i]! - time[0]!) / sampleTime)] = values[i]!;
  return grid;
}

function resampled(
  time: Float64Array,
  values: Float64Array,
  sampleTime: number,
  count: number,
  held: boolean,
): Float64Array {
  const grid = new Float64Array(count).fill(NaN);
  let i = 0;
  for (let k = 0; k < count; k++) {
    const t = time[0]! + k * sampleTime;
    while (i + 2 < time.length && time[i + 1]! <= t) i++;
    const [a, b] = [time[i]!, time[i + 1]!];
    if (b - a > LONGEST_FILL * sampleTime && t - a > sampleTime / 2 && b - t > sampleTime / 2) continue;
    const share = Math.min(Math.max((t - a) / (b - a), 0), 1);
    grid[k] = held ? values[share < 1 ? i : i + 1]! : values[i]! + share * (values[i + 1]! - values[i]!);
  }
  return grid;
}

function isConstant(values: Float64Array): boolean {
  const first = values.find((value) => !Number.isNaN(value));
  return values.every((value) => Number.isNaN(value) || value === first);
}
