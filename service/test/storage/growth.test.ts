import fc from 'fast-check';
import { expect, test } from 'vitest';
import { fullInDays, grownBytes, GROWTH_REACH, rowsPerDay, type Grown } from '../../src/storage/growth.js';

const DAY = 86_400;
const T = 1_764_600_000;

const table = (differs: Partial<Grown>): Grown => ({
  name: 'indicator_minute',
  rows: 1_000,
  bytes: 100_000,
  rowsPerDay: 10,
  growsForDays: Infinity,
  ...differs,
});
const NO_CAPTURES = table({ name: 'capture files', rows: 0, bytes: 0, rowsPerDay: null });

test('rows a day are the slope of the line through the measurements', () => {
  const line = [0, 0.25, 0.5, 1, 3].map((day) => ({ t: T + day * DAY, rows: 500 + 1_440 * day }));
  expect(rowsPerDay(line)).toBeCloseTo(1_440, 6);
  // Around the line by +6, −6, −6, +6, which no line follows.
  const spread = [6, -6, -6, 6].map((off, day) => ({ t: T + day * DAY, rows: 100 * day + off }));
  expect(rowsPerDay(spread)).toBeCloseTo(100, 6);
});

test('less than a day of measurements says nothing of a day', () => {
  expect(rowsPerDay([])).toBeNull();
  expect(rowsPerDay([{ t: T, rows: 5 }])).toBeNull();
  expect(
    rowsPerDay([
      { t: T, rows: 5 },
      { t: T + DAY - 1, rows: 50 },
    ]),
  ).toBeNull();
  expect(
    rowsPerDay([
      { t: T, rows: 5 },
      { t: T + DAY, rows: 50 },
    ]),
  ).toBeCloseTo(45, 9);
});

test('what grew before the reach of growth has no part in it', () => {
  const before = { t: T - GROWTH_REACH - 1, rows: 1_000_000 };
  expect(rowsPerDay([before, { t: T - DAY, rows: 7 }, { t: T, rows: 9 }])).toBeCloseTo(2, 9);
});

test('a table grows at its bytes a row until it holds all that is kept, and never shrinks', () => {
  expect(grownBytes([table({})], 5)).toBeCloseTo(5 * 10 * 100, 9);
  expect(grownBytes([table({ growsForDays: 2 })], 5)).toBeCloseTo(2 * 10 * 100, 9);
  expect(grownBytes([table({ rowsPerDay: -10 })], 5)).toBe(0);
  expect(grownBytes([table({ rows: 0, bytes: 4_096 })], 5)).toBe(0);
});

test('a full disk is foreseen with the backups that grow with the database', () => {
  const of = { database: 100_000, backups: 0, free: 0, backupsKept: 2 };
  // Two backups of 100 000 are still to be made; then each day adds three times 1 000.
  expect(fullInDays([table({})], NO_CAPTURES, { ...of, free: 199_999 })).toBe(0);
  expect(fullInDays([table({})], NO_CAPTURES, { ...of, free: 200_000 })).toBe(1);
  expect(fullInDays([table({})], NO_CAPTURES, { ...of, free: 230_000 })).toBe(11);
  expect(fullInDays([table({})], NO_CAPTURES, { ...of, backups: 200_000, free: 30_000 })).toBe(11);
  // Captures are not backed up with it.
  const captures = table({ name: 'capture files', rows: 10, bytes: 10_000, rowsPerDay: 1 });
  expect(fullInDays([], captures, { ...of, free: 230_000 })).toBe(31);
});

test('level after three days: full before, or not within ten years', () => {
  const of = { database: 0, backups: 0, backupsKept: 0 };
  const level = [table({ growsForDays: 3 })];
  expect(fullInDays(level, NO_CAPTURES, { ...of, free: 2_999 })).toBe(3);
  expect(fullInDays(level, NO_CAPTURES, { ...of, free: 3_000 })).toBeNull();
});

test('the day found is the first on which more is wanted than is free', () => {
  const tables = fc.array(
    fc.record({
      name: fc.constant('t'),
      rows: fc.integer({ min: 1, max: 1e6 }),
      bytes: fc.integer({ min: 1, max: 1e8 }),
      rowsPerDay: fc.option(fc.integer({ min: -1000, max: 100_000 })),
      growsForDays: fc.oneof(fc.integer({ min: 0, max: 1200 }), fc.constant(Infinity)),
    }),
    { maxLength: 6 },
  );
  fc.assert(
    fc.property(tables, fc.integer({ min: 0, max: 1e9 }), (grown, free) => {
      const day = fullInDays(grown, NO_CAPTURES, { database: 0, backups: 0, free, backupsKept: 7 });
      if (day === null) return 8 * grownBytes(grown, 3_650) <= free;
      return 8 * grownBytes(grown, day) > free && (day === 0 || 8 * grownBytes(grown, day - 1) <= free);
    }),
    { numRuns: 300 },
  );
});
