import type { Retention } from '../storage/retention.js';

const MINUTE = 60;
const HOUR = 3_600;

/** Steps of a chart that people read off easily, s: they divide the next larger unit or consist of whole days. */
const STEPS = [
  ...[1, 2, 5, 10, 15, 20, 30],
  ...[1, 2, 3, 5, 10, 15, 20, 30].map((minutes) => minutes * MINUTE),
  ...[1, 2, 3, 4, 6, 8, 12, 24].map((hours) => hours * HOUR),
];

export type Resolution = 'second' | 'minute' | 'hour';
/** Unit of each roll-up, s, and what says how long it is kept; finest first. */
const ROLLUPS = [
  { resolution: 'second', unit: 1, kept: 'seconds' },
  { resolution: 'minute', unit: MINUTE, kept: 'minutes' },
  { resolution: 'hour', unit: HOUR, kept: 'hours' },
] as const;

/**
 * The step of a chart from `from` to `to`, s since the Unix epoch: the shortest easy one that gives no more than so
 * many points, and no shorter than the unit of the finest roll-up that is still kept at `from`; with it the coarsest
 * roll-up that adds up to it, because that has the fewest rows.
 */
export function chartStep(
  from: number,
  to: number,
  points: number,
  kept: Readonly<Retention>,
  now = Date.now() / 1000,
): { step: number; resolution: Resolution } {
  const least = (to - from) / points;
  const stillKept = ROLLUPS.filter((rollup) => kept[rollup.kept] >= now - from);
  const finest = stillKept[0] ?? ROLLUPS[2];
  const step =
    STEPS.find((easy) => easy >= least && easy >= finest.unit) ?? Math.ceil(least / (24 * HOUR)) * 24 * HOUR;
  const { resolution } = ROLLUPS.filter(({ unit }) => unit <= step).at(-1)!;
  return { step, resolution };
}
