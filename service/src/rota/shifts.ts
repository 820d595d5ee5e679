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

/** When a layer holds. */
export interface LayerTimes {
  /** ISO 8601: Monday is 1, Sunday is 7; all seven for every day. */
  weekdays: number[];
  /** HH:mm on the site's clock; null for the whole day. */
  hours: { from: string; to: string } | null;
}

/** A rotation that holds at certain times. */
export interface Layer extends Rotation, LayerTimes {
  name: string;
  /** YYYY-MM-DD: its last turn ends at hand-over on this day; null while it goes on. */
  endDate: string | null;
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
  /** Name of the layer; null by an override. */
  layer: string | null;
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
    if (shift.to > from && userId !== undefined)
      shifts.push({ ...shift, userId, override: false, layer: null });
    if (userId === undefined) return shifts;
  }
}

/** ms */
const DAY = 24 * 3_600_000;

/**
 * When a layer holds, as stretches that touch the time from `from` to `to`: by days of the week, by hours of the day
 * (over midnight where they end no later than they begin; the day is the one on which they begin), or always.
 */
function stretchesOf({ weekdays, hours }: LayerTimes, zone: string, { from, to }: Gap): Gap[] {
  if (!hours && weekdays.length === 7) return [{ from: new Date(-MAX_DATE), to: new Date(MAX_DATE) }];
  const begin = hours?.from ?? '00:00';
  const end = hours?.to ?? '00:00';
  const first = dayjs(from.getTime() - 2 * DAY)
    .tz(zone)
    .format('YYYY-MM-DD');
  const stretches: Gap[] = [];
  for (let date = first; ; date = addDays(date, 1)) {
    const start = localInstant(date, begin, zone);
    if (start >= to) return stretches;
    // ISO 8601: Monday is 1, Sunday is 7.
    if (!weekdays.includes(dayjs.utc(date).day() || 7)) continue;
    const stop = localInstant(end <= begin ? addDays(date, 1) : date, end, zone);
    const last = stretches.at(-1);
    if (last && last.to >= start) last.to = stop;
    else if (stop > start) stretches.push({ from: start, to: stop });
  }
}

/** The last instant that a Date can hold, ms (ECMA-262, Time Values). */
const MAX_DATE = 8.64e15;

/** A layer's turns that touch a stretch of time, cut to the days and hours in which the layer holds. */
function layerShifts(layer: Layer, zone: string, span: Gap): Shift[] {
  const end = layer.endDate ? localInstant(layer.endDate, layer.handOverTime, zone) : new Date(MAX_DATE);
  return rotationShifts(layer, zone, span.from, span.to).flatMap((turn) =>
    stretchesOf(layer, zone, turn).flatMap((stretch) => {
      const from = later(turn.from, stretch.from);
      const to = earlier(earlier(turn.to, stretch.to), end);
      return from < to ? [{ ...turn, from, to, layer: layer.name }] : [];
    }),
  );
}

/** Lays a shift over others: it takes their time where they overlap. */
function layOver(shifts: readonly Shift[], over: Shift): Shift[] {
  return [
    ...shifts.flatMap((shift) => [
      ...(shift.from < over.from ? [{ ...shift, to: earlier(shift.to, over.from) }] : []),
      ...(shift.to > over.to ? [{ ...shift, from: later(shift.from, over.to) }] : []),
    ]),
    over,
  ];
}

const touches = (a: Gap, b: Gap): boolean => a.to > b.from && a.from < b.to;

/**
 * Who is on call between two instants, in order: the layers, a later one over an earlier one, and overrides over all.
 * Shifts at the ends are whole: they say when somebody came on call, and when they hand over in fact.
 *
 * @param overrides in the order in which they were made: where they overlap, the later counts
 * @param available whether somebody can be on call; the turn of one who cannot leaves what lies under it, their override
 *   is not looked at
 */
export function shiftsBetween(
  layers: readonly Layer[],
  overrides: readonly Override[],
  zone: string,
  span: Gap,
  available: (userId: number) => boolean = () => true,
): Shift[] {
  const covering = overrides
    .filter(({ userId }) => available(userId))
    .map(({ from, to, userId }): Shift => ({ from, to, userId, override: true, layer: null }));
  // What touches the span reaches further; only with everything over that whole reach is its end the true one.
  const touching = [...layers.flatMap((layer) => layerShifts(layer, zone, span)), ...covering].filter(
    (shift) => touches(shift, span),
  );
  const reach = {
    from: touching.reduce((at, { from }) => earlier(at, from), span.from),
    to: touching.reduce((at, { to }) => later(at, to), span.to),
  };
  return [
    ...layers.flatMap((layer) => layerShifts(layer, zone, reach)).filter(({ userId }) => available(userId)),
    ...covering.filter((shift) => touches(shift, reach)),
  ]
    .reduce<Shift[]>(layOver, [])
    .filter((shift) => touches(shift, span))
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
