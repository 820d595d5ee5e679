const HOUR = 3_600;
const DAY = 24 * HOUR;
const YEAR = 365 * DAY;

export const RETENTION_KINDS = ['seconds', 'minutes', 'hours', 'estimates', 'alertCaptures'] as const;
export type RetentionKind = (typeof RETENTION_KINDS)[number];
/** How long each kind is kept, s. */
export type Retention = Record<RetentionKind, number>;

interface RetentionLimits {
  /** What is kept, in plain words. */
  title: string;
  /** s */
  default: number;
  least: number;
  most: number;
}

/**
 * Each kind with its default and the limits of what may be set, s. What the service itself looks back at sets the
 * least: the tiles' strips two minutes of seconds, a trial the moves of some shifts, the drift plot's trail a month of
 * estimates. The most keeps the file within what one machine carries (common practice, no source).
 */
export const RETENTION: Record<RetentionKind, RetentionLimits> = {
  seconds: { title: 'Seconds', default: 2 * HOUR, least: HOUR, most: 7 * DAY },
  minutes: { title: 'Minutes and moves', default: 60 * DAY, least: 7 * DAY, most: 2 * YEAR },
  hours: { title: 'Hours', default: 3 * YEAR, least: 30 * DAY, most: 20 * YEAR },
  estimates: { title: 'Plant estimates', default: 3 * YEAR, least: 30 * DAY, most: 20 * YEAR },
  alertCaptures: { title: 'Captures around alerts', default: 60 * DAY, least: DAY, most: 3 * YEAR },
};

/** The kind that each table with a time of its own is kept by. Moves are looked at beside minutes and go with them. */
export const KIND_OF = {
  indicator_second: 'seconds',
  move_record: 'minutes',
  indicator_minute: 'minutes',
  indicator_hour: 'hours',
  plant_estimate_row: 'estimates',
} as const satisfies Record<string, RetentionKind>;

/**
 * What is wrong with a retention: each value within its limits, and no coarser roll-up kept shorter than a finer one,
 * or a chart would lose its older part first.
 */
export function retentionProblems(retention: Retention): { path: RetentionKind; message: string }[] {
  const outside = RETENTION_KINDS.filter(
    (kind) => retention[kind] < RETENTION[kind].least || retention[kind] > RETENTION[kind].most,
  ).map((kind) => ({
    path: kind,
    message: `must be from ${span(RETENTION[kind].least)} to ${span(RETENTION[kind].most)}`,
  }));
  if (outside.length > 0) return outside;
  return retention.hours < retention.minutes
    ? [{ path: 'hours', message: 'must not be kept shorter than minutes' }]
    : [];
}

/** A stretch of time in the largest unit that divides it: "2 h", "60 days", "3 years". */
export function span(seconds: number): string {
  for (const [unit, one, many] of [
    [YEAR, 'year', 'years'],
    [DAY, 'day', 'days'],
    [HOUR, 'h', 'h'],
    [60, 'min', 'min'],
  ] as const)
    if (seconds >= unit && seconds % unit === 0) {
      const count = seconds / unit;
      return `${count} ${count === 1 ? one : many}`;
    }
  return `${seconds} s`;
}
