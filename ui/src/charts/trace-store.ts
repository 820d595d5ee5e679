import type { LiveTrace } from '../api/live';

/** Seconds that the live trace shows, and points kept for them. */
export const SPAN = 20;
const MOST_POINTS = 6_000;

/** Points a second that a trace as wide as the window can show: two a pixel, the least and the largest. */
export const traceRate = (): number => Math.min(MOST_POINTS, 2 * window.innerWidth) / SPAN;

export type TraceRows = [
  time: number[],
  target: number[],
  position: number[],
  error: number[],
  output: number[],
];

/** Target, position, following error and output of one axis, as they arrive. */
export class TraceStore {
  rows: TraceRows = [[], [], [], [], []];
  private readonly listeners = new Set<() => void>();

  push({ time, target, position, output }: LiveTrace): void {
    const [t, r, y, e, u] = this.rows;
    for (let i = 0; i < time.length; i++) {
      t.push(time[i]!);
      r.push(target[i]!);
      y.push(position[i]!);
      e.push(target[i]! - position[i]!);
      u.push(output[i]!);
    }
    const drop = Math.max(
      t.length - MOST_POINTS,
      t.findIndex((at) => at > t.at(-1)! - SPAN),
    );
    if (drop > 0) for (const row of this.rows) row.splice(0, drop);
    for (const listener of this.listeners) listener();
  }

  /** The rows as they are now, for looking at while more arrives. */
  held(): TraceRows {
    return this.rows.map((row) => [...row]) as TraceRows;
  }

  listen(listener: () => void): () => void {
    this.listeners.add(listener);
    return () => void this.listeners.delete(listener);
  }
}
