import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import {
  gapsBetween,
  localInstant,
  rotationShifts,
  shiftsBetween,
  type Layer,
  type Override,
  type Rotation,
  type Shift,
} from '../../src/rota/shifts.js';

const HOUR = 3_600_000;
const DAY = 24 * HOUR;
const at = (iso: string) => new Date(iso);
const daily = (members: number[], startDate = '2026-01-01', handOverTime = '06:00'): Rotation => ({
  memberIds: members,
  handOverTime,
  rotationDays: 1,
  startDate,
});
const layer = (rotation: Rotation, times: Partial<Layer> = {}): Layer => ({
  ...rotation,
  name: 'Rotation',
  endDate: null,
  weekdays: [1, 2, 3, 4, 5, 6, 7],
  hours: null,
  ...times,
});
const written = (shifts: Shift[]) =>
  shifts.map(
    ({ from, to, userId }) => `${userId} ${from.toISOString().slice(5, 16)} ${to.toISOString().slice(5, 16)}`,
  );

/** The site's wall clock at an instant, by Intl and not by the library that the rota uses. */
const wallClock = (instant: Date, zone: string): string =>
  new Intl.DateTimeFormat('sv-SE', { timeZone: zone, dateStyle: 'short', timeStyle: 'short' }).format(
    instant,
  );

describe('local time', () => {
  // Transition instants by the IANA time zone database (from memory): EU 01:00 UTC, US 02:00 local.
  it.each([
    ['2026-06-15', '06:00', 'Europe/London', '2026-06-15T05:00:00.000Z'],
    ['2026-12-15', '06:00', 'Europe/London', '2026-12-15T06:00:00.000Z'],
    ['2026-03-29', '06:00', 'Europe/London', '2026-03-29T05:00:00.000Z'],
    ['2026-10-25', '00:30', 'Europe/London', '2026-10-24T23:30:00.000Z'],
    ['2026-03-08', '06:00', 'America/New_York', '2026-03-08T10:00:00.000Z'],
    ['2026-11-01', '06:00', 'America/New_York', '2026-11-01T11:00:00.000Z'],
    ['2026-07-01', '06:00', 'Asia/Kolkata', '2026-07-01T00:30:00.000Z'],
    ['2026-10-04', '06:00', 'Australia/Lord_Howe', '2026-10-03T19:00:00.000Z'],
  ])('%s %s in %s is %s', (date, time, zone, instant) => {
    expect(localInstant(date, time, zone).toISOString()).toBe(instant);
  });

  it('takes a time that the clocks skip as much later as they jump', () => {
    expect(localInstant('2026-03-29', '01:30', 'Europe/London').toISOString()).toBe(
      '2026-03-29T01:30:00.000Z',
    );
    expect(wallClock(localInstant('2026-03-29', '01:30', 'Europe/London'), 'Europe/London')).toBe(
      '2026-03-29 02:30',
    );
  });

  it('takes a time that comes twice at its second coming', () => {
    expect(localInstant('2026-10-25', '01:30', 'Europe/London').toISOString()).toBe(
      '2026-10-25T01:30:00.000Z',
    );
  });
});

describe('rotation', () => {
  it('gives turns in order, whole at both ends', () => {
    const shifts = rotationShifts(daily([7, 8, 9]), 'UTC', at('2026-01-04T05:59Z'), at('2026-01-06T06:00Z'));
    expect(written(shifts)).toEqual([
      '9 01-03T06:00 01-04T06:00',
      '7 01-04T06:00 01-05T06:00',
      '8 01-05T06:00 01-06T06:00',
    ]);
  });

  it('hands over to the instant', () => {
    const onCall = (iso: string) =>
      rotationShifts(daily([7, 8]), 'UTC', at(iso), new Date(at(iso).getTime() + 1));
    expect(onCall('2026-01-02T05:59:59.999Z').map(({ userId }) => userId)).toEqual([7]);
    expect(onCall('2026-01-02T06:00:00.000Z').map(({ userId }) => userId)).toEqual([8]);
  });

  it('has nobody before its start date', () => {
    expect(rotationShifts(daily([7]), 'UTC', at('2025-12-01T00:00Z'), at('2026-01-01T06:00Z'))).toEqual([]);
    expect(rotationShifts(daily([7]), 'UTC', at('2025-12-01T00:00Z'), at('2026-01-01T06:01Z'))).toHaveLength(
      1,
    );
  });

  it.each([
    ['Europe/London', '2026-03-28', 23],
    ['Europe/London', '2026-10-24', 25],
    ['America/New_York', '2026-03-07', 23],
    ['America/New_York', '2026-10-31', 25],
    ['Australia/Lord_Howe', '2026-10-03', 23.5],
  ])('in %s the turn from %s lasts %d hours and still ends at six', (zone, date, hours) => {
    const from = localInstant(date, '06:00', zone);
    const [shift] = rotationShifts(daily([7, 8]), zone, from, new Date(from.getTime() + 1));
    expect((shift!.to.getTime() - shift!.from.getTime()) / HOUR).toBe(hours);
    expect(wallClock(shift!.from, zone)).toBe(`${date} 06:00`);
    expect(wallClock(shift!.to, zone)).toMatch(/ 06:00$/);
  });

  it('in any zone leaves no gap, hands over on the clock and keeps the order, over years of clock changes', () => {
    const zones = [
      'Europe/London',
      'America/New_York',
      'Australia/Lord_Howe',
      'Pacific/Chatham',
      'Asia/Kolkata',
    ];
    fc.assert(
      fc.property(
        fc.constantFrom(...zones),
        fc.integer({ min: 0, max: 23 }),
        fc.integer({ min: 1, max: 10 }),
        fc.integer({ min: 1, max: 5 }),
        fc.integer({ min: 0, max: 4 * 365 }),
        (zone, hour, rotationDays, count, day) => {
          const handOverTime = `${String(hour).padStart(2, '0')}:00`;
          const memberIds = Array.from({ length: count }, (_, i) => i + 1);
          const rotation = { memberIds, handOverTime, rotationDays, startDate: '2025-01-01' };
          const from = new Date(Date.UTC(2025, 0, 3) + day * DAY);
          const to = new Date(from.getTime() + 30 * DAY);
          const shifts = rotationShifts(rotation, zone, from, to);
          expect(gapsBetween(shifts, { from, to })).toEqual([]);
          shifts.forEach((shift, i) => {
            const next = shifts[i + 1];
            if (next) {
              expect(next.from).toEqual(shift.to);
              expect(next.userId).toBe((shift.userId % count) + 1);
            }
            // On the clock, or where the clocks skip that time, within the hour after.
            const [date, clock] = wallClock(shift.from, zone).split(' ') as [string, string];
            const late = Number(clock.slice(0, 2)) * 60 + Number(clock.slice(3)) - hour * 60;
            expect(
              late === 0 || (late > 0 && late <= 60 && localInstant(date, handOverTime, zone) >= shift.from),
            ).toBe(true);
          });
        },
      ),
      { numRuns: 150 },
    );
  });
});

describe('layers', () => {
  const zone = 'Europe/London';
  const base = layer({ ...daily([7]), rotationDays: 7, startDate: '2026-03-02' }, { name: 'All hours' });
  const office = layer(daily([1, 2], '2026-03-02', '00:00'), {
    name: 'Office hours',
    weekdays: [1, 2, 3, 4, 5],
    hours: { from: '08:00', to: '17:00' },
  });

  it('a later one takes its days and hours from an earlier one, which holds again afterwards', () => {
    const span = { from: at('2026-03-05T12:00Z'), to: at('2026-03-07T00:00Z') }; // Thursday to Friday
    const shifts = shiftsBetween([base, office], [], zone, span);
    expect(written(shifts)).toEqual([
      '2 03-05T08:00 03-05T17:00',
      '7 03-05T17:00 03-06T08:00',
      '1 03-06T08:00 03-06T17:00',
      '7 03-06T17:00 03-09T06:00',
    ]);
    expect(shifts.map((shift) => shift.layer)).toEqual([
      'Office hours',
      'All hours',
      'Office hours',
      'All hours',
    ]);
    // The other way round the base covers all.
    expect(written(shiftsBetween([office, base], [], zone, span))).toEqual(['7 03-02T06:00 03-09T06:00']);
  });

  it('a shift says when it hands over in fact, though what follows lies outside the time asked for', () => {
    const now = { from: at('2026-03-05T20:00Z'), to: at('2026-03-05T20:00:00.001Z') };
    const late = { userId: 9, from: at('2026-03-06T02:00Z'), to: at('2026-03-06T03:00Z') };
    expect(written(shiftsBetween([base, office], [], zone, now))).toEqual(['7 03-05T17:00 03-06T08:00']);
    expect(written(shiftsBetween([base, office], [late], zone, now))).toEqual(['7 03-05T17:00 03-06T02:00']);
  });

  it('keeps its hours on the clock over a change of the clocks, in both directions and two zones', () => {
    const night = layer(daily([1], '2026-01-01', '12:00'), { hours: { from: '22:00', to: '06:00' } });
    const hours = (where: string, date: string): number[] => {
      const noon = localInstant(date, '12:00', where);
      return shiftsBetween([night], [], where, { from: noon, to: new Date(noon.getTime() + DAY) })
        .filter(({ from }) => from >= noon)
        .map(({ from, to }) => (to.getTime() - from.getTime()) / HOUR);
    };
    expect(hours('Europe/London', '2026-03-27')).toEqual([8]);
    expect(hours('Europe/London', '2026-03-28')).toEqual([7]);
    expect(hours('Europe/London', '2026-10-24')).toEqual([9]);
    expect(hours('America/New_York', '2026-03-07')).toEqual([7]);
    expect(hours('America/New_York', '2026-10-31')).toEqual([9]);
  });

  it('ends with its last day, and leaves what lies under it where its person cannot be on call', () => {
    const span = { from: at('2026-03-05T12:00Z'), to: at('2026-03-06T12:00Z') };
    const ended = { ...office, endDate: '2026-03-06' };
    expect(shiftsBetween([base, ended], [], zone, span).map(({ userId }) => userId)).toEqual([2, 7]);
    expect(
      shiftsBetween([base, office], [], zone, span, (id) => id !== 1).map(({ userId }) => userId),
    ).toEqual([2, 7]);
  });

  it('at every instant the last layer that holds counts, by the wall clock of Intl', () => {
    const times = fc.record({
      weekdays: fc.uniqueArray(fc.integer({ min: 1, max: 7 }), { minLength: 1 }),
      from: fc.integer({ min: 0, max: 23 }),
      to: fc.integer({ min: 0, max: 23 }),
    });
    const clockHour = (hour: number): string => `${String(hour).padStart(2, '0')}:00`;
    fc.assert(
      fc.property(
        times,
        fc.constantFrom('Asia/Kolkata', 'America/New_York'),
        ({ weekdays, from, to }, where) => {
          const upper = layer(daily([2], '2025-12-01', '00:00'), {
            weekdays,
            hours: { from: clockHour(from), to: clockHour(to) },
          });
          const span = { from: at('2026-06-01T00:00Z'), to: at('2026-06-09T00:00Z') };
          const under = layer(daily([1], '2025-12-01'));
          const shifts = shiftsBetween([under, upper], [], where, span);
          for (let t = span.from.getTime(); t < span.to.getTime(); t += 3 * HOUR) {
            const on = shifts.filter((shift) => shift.from.getTime() <= t && t < shift.to.getTime());
            const [day, clock] = wallClock(new Date(t), where).split(' ') as [string, string];
            const today = new Date(`${day}T00:00Z`).getUTCDay() || 7;
            const hour = Number(clock.slice(0, 2));
            const held =
              from < to
                ? weekdays.includes(today) && hour >= from && hour < to
                : (weekdays.includes(today) && hour >= from) ||
                  (weekdays.includes(today === 1 ? 7 : today - 1) && hour < to);
            expect(on.map(({ userId }) => userId)).toEqual([held ? 2 : 1]);
          }
        },
      ),
      { numRuns: 40 },
    );
  });
});

describe('overrides', () => {
  const week = { from: at('2026-01-05T00:00Z'), to: at('2026-01-07T00:00Z') };
  const override = (userId: number, from: string, to: string): Override => ({
    userId,
    from: at(from),
    to: at(to),
  });

  it('cut the turns that they cover and leave the rest', () => {
    const shifts = shiftsBetween(
      [layer(daily([7, 8]))],
      [override(3, '2026-01-05T12:00Z', '2026-01-06T08:00Z')],
      'UTC',
      week,
    );
    expect(written(shifts)).toEqual([
      '8 01-04T06:00 01-05T06:00',
      '7 01-05T06:00 01-05T12:00',
      '3 01-05T12:00 01-06T08:00',
      '8 01-06T08:00 01-07T06:00',
    ]);
    expect(shifts.map((shift) => shift.override)).toEqual([false, false, true, false]);
  });

  it('split a turn in two', () => {
    const shifts = shiftsBetween(
      [layer(daily([7]))],
      [override(3, '2026-01-05T12:00Z', '2026-01-05T14:00Z')],
      'UTC',
      {
        from: at('2026-01-05T07:00Z'),
        to: at('2026-01-05T20:00Z'),
      },
    );
    expect(written(shifts)).toEqual([
      '7 01-05T06:00 01-05T12:00',
      '3 01-05T12:00 01-05T14:00',
      '7 01-05T14:00 01-06T06:00',
    ]);
  });

  it('count as they were made: the later one where two overlap', () => {
    const first = override(3, '2026-01-05T06:00Z', '2026-01-05T18:00Z');
    const second = override(4, '2026-01-05T12:00Z', '2026-01-05T14:00Z');
    const who = (overrides: Override[]) =>
      shiftsBetween([], overrides, 'UTC', week).map(({ userId }) => userId);
    expect(who([first, second])).toEqual([3, 4, 3]);
    expect(who([second, first])).toEqual([3]);
  });

  it('of somebody who cannot be on call are not looked at, and their turns are gaps', () => {
    const overrides = [override(3, '2026-01-05T12:00Z', '2026-01-05T14:00Z')];
    const shifts = shiftsBetween([layer(daily([7, 8]))], overrides, 'UTC', week, (id) => id === 8);
    expect(shifts.map(({ userId }) => userId)).toEqual([8, 8]);
    expect(gapsBetween(shifts, week)).toEqual([
      { from: at('2026-01-05T06:00Z'), to: at('2026-01-06T06:00Z') },
    ]);
  });

  it('never leave two people on call at once, and never less covered than before', () => {
    const instant = fc.integer({ min: 0, max: 96 }).map((h) => new Date(Date.UTC(2026, 0, 4) + h * HOUR));
    const someOverride = fc
      .record({ userId: fc.integer({ min: 1, max: 5 }), a: instant, b: instant })
      .filter(({ a, b }) => a < b)
      .map(({ userId, a, b }) => ({ userId, from: a, to: b }));
    fc.assert(
      fc.property(fc.array(someOverride, { maxLength: 6 }), fc.boolean(), (overrides, withRotation) => {
        const rotation = withRotation ? daily([7, 8]) : null;
        const shifts = shiftsBetween(rotation ? [layer(rotation)] : [], overrides, 'UTC', week);
        for (let t = week.from.getTime(); t < week.to.getTime(); t += HOUR / 2) {
          const on = shifts.filter(({ from, to }) => from.getTime() <= t && t < to.getTime());
          const last = overrides.findLast(({ from, to }) => from.getTime() <= t && t < to.getTime());
          expect(on).toHaveLength(last || rotation ? 1 : 0);
          if (last) expect(on[0]).toMatchObject({ userId: last.userId, override: true });
        }
      }),
      { numRuns: 150 },
    );
  });
});

describe('gaps', () => {
  const span = { from: at('2026-01-01T00:00Z'), to: at('2026-01-02T00:00Z') };
  const shift = (from: string, to: string): Shift => ({
    from: at(from),
    to: at(to),
    userId: 1,
    override: false,
    layer: null,
  });

  it('are the whole time where there is no rota', () => {
    expect(gapsBetween(shiftsBetween([], [], 'UTC', span), span)).toEqual([span]);
  });

  it('are found at both ends and between', () => {
    const shifts = [
      shift('2026-01-01T02:00Z', '2026-01-01T03:00Z'),
      shift('2026-01-01T05:00Z', '2026-01-01T20:00Z'),
    ];
    expect(gapsBetween(shifts, span).map(({ from, to }) => [from.getUTCHours(), to.getUTCHours()])).toEqual([
      [0, 2],
      [3, 5],
      [20, 0],
    ]);
  });
});
