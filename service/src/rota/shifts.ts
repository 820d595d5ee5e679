import dayjs from 'dayjs';
import timezone from 'dayjs/plugin/timezone.js';
import utc from 'dayjs/plugin/utc.js';

dayjs.extend(utc);
dayjs.extend(timezone);

export interface Rotation {
  /** Who takes turns, in this order; somebody may come more than once. */
  memberIds: number[];
  /** HH:mm on the site's clock */
  handOverTime: string;
  /** Days that one turn lasts. */
  rotationDays: number;
  /** YYYY-MM-DD: the first turn begins at hand-over on this day. */
  startDate: string;
}

export interface Override {
  userId: number;
  from: Date;
  to: Date;
}

/** Somebody is on call from one instant to just before another. */
export interface Shift {
  from: Date;
  to: Date;
  userId: number;
  /** Somebody stands in: not by the rotation. */
  override: boolean;
}

export interface Gap {
  from: Date;
  to: Date;
}

/**
 * The instant of a local time on a calendar day. A time that a clock change skips is taken as much later as the clocks
 * jump; of a time that comes twice, the second counts.
 *
 * @param date YYYY-MM-DD
 * @param time HH:mm
 * @param zone IANA name
 */
export const localInstant = (date: string, time: string, zone: string): Date =>
  dayjs.tz(`${date}T${time}`, zone).toDate();

/** YYYY-MM-DD, some days later (or earlier). */
const addDays = (date: string, days: number): string => dayjs.utc(date).add(days, 'day').format('YYYY-MM-DD');

/**
 * The rotation's turns that touch the time from `from` to `to`, whole. Turn k of n members belongs to member k mod n and
 * lasts from hand-over on startDate + k·rotationDays to hand-over rotationDays later, by the site's clock: it is an hour
 * shorter or longer over a clock change. There is none before the start date.
 */
export function rotationShifts(rotation: Rotation, zone: string, from: Date, to: Date): Shift[] {
  const { memberIds, handOverTime, rotationDays, startDate } = rotation;
  const begin = (turn: number) => localInstant(addDays(startDate, turn * rotationDays), handOverTime, zone);
  const today = dayjs(from).tz(zone).format('YYYY-MM-DD');
  const days = dayjs.utc(today).diff(dayjs.utc(startDate), 'day');
  const shifts: Shift[] = [];
  // One turn early: before today's hand-over the day still belongs to the turn before.
  for (let turn = Math.max(0, Math.floor(days / rotationDays) - 1); ; turn++) {
    const shift = { from: begin(turn), to: begin(turn + 1) };
    if (shift.from >= to) return shifts;
    const userId = memberIds[turn % memberIds.length];
    if (shift.to > from && userId !== undefined) shifts.push({ ...shift, userId, override: false });
    if (userId === undefined) return shifts;
  }
}

/**
 * Who is on call between two instants, in order: the rotation with overrides put over it. Shifts at the ends are whole.
 *
 * @param overrides in the order in which they were made: where they overlap, the later counts
 * @param available whether somebody can be on call; the turn of one who cannot is a gap, their override is not looked at
 */
export function shiftsBetween(
  rotation: Rotation | null,
  overrides: readonly Override[],
  zone: string,
  { from, to }: Gap,
  available: (userId: number) => boolean = () => true,
): Shift[] {
  let shifts = rotation
    ? rotationShifts(rotation, zone, from, to).filter(({ userId }) => available(userId))
    : [];
  for (const override of overrides) {
    if (override.to <= from || override.from >= to || !available(override.userId)) continue;
    shifts = shifts.flatMap((shift) => [
      ...(shift.from < override.from ? [{ ...shift, to: earlier(shift.to, override.from) }] : []),
      ...(shift.to > override.to ? [{ ...shift, from: later(shift.from, override.to) }] : []),
    ]);
    shifts.push({ from: override.from, to: override.to, userId: override.userId, override: true });
  }
  return shifts
    .filter((shift) => shift.to > from && shift.from < to)
    .sort((a, b) => a.from.getTime() - b.from.getTime());
}

/** The stretches between two instants in which nobody is on call. */
export function gapsBetween(shifts: readonly Shift[], { from, to }: Gap): Gap[] {
  const gaps: Gap[] = [];
  let covered = from;
  for (const shift of shifts) {
    if (shift.from > covered) gaps.push({ from: covered, to: earlier(shift.from, to) });
    covered = later(covered, shift.to);
  }
  if (covered < to) gaps.push({ from: covered, to });
  return gaps;
}

const earlier = (a: Date, b: Date): Date => (a < b ? a : b);
const later = (a: Date, b: Date): Date => (a > b ? a : b);
