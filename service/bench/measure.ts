import { execFile } from 'node:child_process';
import { promisify } from 'node:util';

/** One line of `npm run bench`: a figure, the least the same work can cost, and the ratio of the two. */
export interface BenchRecord {
  name: string;
  value: number | null;
  unit: string;
  floor: number | null;
  ratio: number | null;
  note?: string;
}

/** Milliseconds of the least disturbed run of `work`, after warming up. */
export function bestMs(work: () => void, runs: number): number {
  for (let i = 0; i < Math.min(runs, 20); i++) work();
  let best = Infinity;
  for (let i = 0; i < runs; i++) {
    const from = performance.now();
    work();
    best = Math.min(best, performance.now() - from);
  }
  return best;
}

/** `bestMs` of two works taken in turn, so that what else the machine does meets both. */
export function bestMsOfBoth(one: () => void, other: () => void, runs: number): [number, number] {
  const best: [number, number] = [Infinity, Infinity];
  for (let i = 0; i < runs; i++) {
    best[0] = Math.min(best[0], bestMs(one, 1));
    best[1] = Math.min(best[1], bestMs(other, 1));
  }
  return best;
}

/** The number that a Python script prints for an input on its standard input; null where it cannot run. */
export async function pythonNumber(script: string, input: string): Promise<number | null> {
  try {
    const run = promisify(execFile)('python3', ['-c', script], { timeout: 120_000 });
    run.child.stdin?.end(input);
    const value = Number((await run).stdout);
    return Number.isFinite(value) ? value : null;
  } catch {
    return null;
  }
}

export const round = (x: number): number => Number(x.toPrecision(4));
