/** An alert came up. */
export interface Raised {
  /** ms since 1970 */
  at: number;
  alertId: number;
  axisId: number;
  rule: string;
}

/** Somebody acknowledged an alert, ms since 1970. */
export interface Acknowledged {
  at: number;
  alertId: number;
}

export interface Flood {
  from: number;
  to: number;
  alerts: number;
}

const MINUTE = 60_000;
const DAY = 24 * 60 * MINUTE;

/**
 * Published figures (ANSI/ISA-18.2-2016 and EEMUA 191, from memory): alerts a day that one person can take, and the
 * number in ten minutes above which they come as a flood; by ISA-18.2, also from memory, an alert chatters when it comes
 * three times or more within a minute and is stale when it has stood for a day.
 */
export const PUBLISHED = {
  acceptablePerDay: 150,
  manageablePerDay: 300,
  flood: { alerts: 10, within: 10 * MINUTE },
  chatter: { times: 3, within: MINUTE },
  stale: DAY,
} as const;

export const LOADS = ['acceptable', 'manageable', 'too many'] as const;
export type Load = (typeof LOADS)[number];

/** How many alerts a day are, by the published figures. */
export const loadOf = (perDay: number): Load =>
  perDay <= PUBLISHED.acceptablePerDay
    ? 'acceptable'
    : perDay <= PUBLISHED.manageablePerDay
      ? 'manageable'
      : 'too many';

/**
 * Stretches in which more than ten alerts came in every ten minutes: from the first alert of the first such ten minutes
 * to the last alert of the last.
 *
 * @param at when alerts came, ms, in order
 */
export function floodsOf(at: readonly number[]): Flood[] {
  const { alerts, within } = PUBLISHED.flood;
  const floods: (Flood & { first: number })[] = [];
  for (let last = alerts; last < at.length; last++) {
    // The eleventh alert back: with it, more than ten came within the time.
    const first = last - alerts;
    if (at[last]! - at[first]! >= within) continue;
    const open = floods.at(-1);
    if (open && at[first]! <= open.to) Object.assign(open, { to: at[last], alerts: last - open.first + 1 });
    else floods.push({ from: at[first]!, to: at[last]!, alerts: last - first + 1, first });
  }
  return floods.map(({ from, to, alerts }) => ({ from, to, alerts }));
}

/** Whether something came three times or more within a minute. `at` in ms, in order. */
export const chatters = (at: readonly number[]): boolean =>
  at.some((t, i) => {
    const before = at[i - PUBLISHED.chatter.times + 1];
    return before !== undefined && t - before <= PUBLISHED.chatter.within;
  });

/**
 * How long each raised alert waited for somebody, ms: to the first acknowledgement before the same alert was raised
 * again; null where there was none.
 *
 * @param raised in order of time
 * @param acknowledged in order of time
 */
export function waits(raised: readonly Raised[], acknowledged: readonly Acknowledged[]): (number | null)[] {
  const next = new Map<number, number>();
  const answers = new Map<number, number[]>();
  for (const { alertId, at } of acknowledged) answers.set(alertId, [...(answers.get(alertId) ?? []), at]);
  const found: (number | null)[] = [];
  for (const { alertId, at } of [...raised].reverse()) {
    const until = next.get(alertId) ?? Infinity;
    const answer = answers.get(alertId)?.find((time) => time >= at && time < until);
    found.push(answer === undefined ? null : answer - at);
    next.set(alertId, at);
  }
  return found.reverse();
}

/** The value that a share of all do not exceed (nearest rank); null of none. */
export function percentile(values: readonly number[], share: number): number | null {
  const sorted = [...values].sort((a, b) => a - b);
  return sorted[Math.max(0, Math.ceil(share * sorted.length) - 1)] ?? null;
}
