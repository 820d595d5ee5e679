import { describe, expect, test } from 'vitest';
import type { RecordedMove } from '../../src/indicators/move-recorder.js';
import { CHECKLIST, missingFrom } from '../../src/proposals/checklist.js';
import { median, rankTest, shiftBetween } from '../../src/proposals/rank-statistics.js';
import { compareMoves, LEAST_MOVES } from '../../src/proposals/trial.js';
import { randomSource } from '../identification/test-axis.js';

describe('the rank test', () => {
  // Made with SciPy 1.17.1: scipy.stats.mannwhitneyu(b, a, method="asymptotic", use_continuity=True).
  test.each([
    {
      name: 'without overlap',
      a: [1, 2, 3, 4, 5, 6, 7, 8],
      b: [9, 10, 11, 12, 13, 14, 15, 16],
      greater: 0.00046955284955859495,
      less: 0.9996789556020677,
    },
    {
      name: 'of unequal sizes',
      a: [0.8, 0.83, 1.89, 1.04, 1.45, 1.38, 1.91, 1.64, 0.73, 1.46],
      b: [1.15, 0.88, 0.9, 0.74, 1.21],
      greater: 0.9007753482039937,
      less: 0.12231180256349167,
    },
    {
      name: 'with ties',
      a: [1, 1, 2, 2, 3, 3, 3, 4],
      b: [2, 3, 3, 4, 4, 4, 5, 5, 6],
      greater: 0.009086021518653975,
      less: 0.9930630995527953,
    },
    {
      name: 'with nearly everything tied',
      a: [0, 0, 0, 0, 0, 0, 0, 0],
      b: [0, 0, 0, 0, 2, 0, 3, 0, 0],
      greater: 0.09879111431007798,
      less: 0.9278915878216066,
    },
    {
      name: 'of samples in balance',
      a: [5.1, 4.9, 5.0, 5.2, 4.8, 5.05],
      b: [5.0, 5.1, 4.95, 5.15, 4.85],
      greater: 0.5365337419591752,
      less: 0.5365337419591752,
    },
  ])('$name agrees with SciPy', ({ a, b, greater, less }) => {
    const { pGreater, pLess } = rankTest(a, b);
    expect(pGreater).toBeCloseTo(greater, 6);
    expect(pLess).toBeCloseTo(less, 6);
    const swapped = rankTest(b, a);
    expect(swapped.pGreater).toBeCloseTo(less, 6);
  });

  test('of equal values says nothing', () => {
    expect(rankTest([3, 3, 3], [3, 3])).toEqual({ pGreater: 1, pLess: 1 });
  });
});

describe('the shift between two samples', () => {
  // Permeability of membranes at term and at 12 to 26 weeks (Hollander & Wolfe, Nonparametric Statistical Methods, 1973,
  // p. 69 f.): 0.305 with the 95 % interval −0.15 … 0.76; made again with NumPy from all 50 differences.
  const term = [0.8, 0.83, 1.89, 1.04, 1.45, 1.38, 1.91, 1.64, 0.73, 1.46];
  const weeks = [1.15, 0.88, 0.9, 0.74, 1.21];

  test('agrees with a published example', () => {
    const { value, low, high } = shiftBetween(weeks, term);
    expect([value, low, high]).toEqual([0.305, -0.15, 0.76].map((x) => expect.closeTo(x, 12) as unknown));
    const back = shiftBetween(term, weeks);
    expect([back.value, back.low, back.high]).toEqual(
      [-0.305, -0.76, 0.15].map((x) => expect.closeTo(x, 12) as unknown),
    );
  });

  test('covers the truth about 95 times in 100', () => {
    const random = randomSource(11);
    const sample = (n: number, at: number): number[] =>
      Array.from({ length: n }, () => at - Math.log(1 - random()));
    let covered = 0;
    for (let i = 0; i < 1000; i++) {
      const { low, high } = shiftBetween(sample(12, 3), sample(9, 3.7));
      if (low <= 0.7 && high >= 0.7) covered++;
    }
    expect(covered).toBeGreaterThan(930);
    expect(covered).toBeLessThan(975);
  });
});

test('the median of an even number lies between the middle two', () => {
  expect(median([4, 1, 3, 2])).toBe(2.5);
  expect(median([9, 1, 5])).toBe(5);
  expect(median([])).toBeNaN();
});

describe('moves before and after', () => {
  const START = new Date('2026-03-02T10:00:00Z');
  const random = randomSource(5);
  /** So many moves of one kind whose peak error scatters by ±3 % about `peak`. */
  const moves = (count: number, peak: number, kind: Partial<RecordedMove> = {}): RecordedMove[] =>
    Array.from({ length: count }, (_, t) => {
      const error = peak * (0.97 + 0.06 * random());
      return {
        t,
        distance: 250,
        duration: 0.9,
        peakError: error,
        rmsError: error / 3,
        saturatedPct: 0,
        ...kind,
      };
    });

  test.each([
    ['better', 1, 0.6],
    ['worse', 1, 1.5],
    ['no different', 1, 1],
    // 3 % is certain here, and nobody notices it.
    ['no different', 1, 1.03],
  ])('are %s when the peak error goes from %d to %d mm', (verdict, before, after) => {
    const trial = compareMoves(moves(40, before), moves(60, after), START);
    expect(trial).toMatchObject({
      verdict,
      moves: { before: 40, after: 60 },
      startedAt: START.toISOString(),
    });
    expect(trial.peakFollowingError!.before).toBeCloseTo(before, 1);
    expect(trial.peakFollowingError!.after).toBeCloseTo(after, 1);
    const { low, high } = trial.peakFollowingError!.change!;
    expect(low).toBeLessThan(100 * (after / before - 1));
    expect(high).toBeGreaterThan(100 * (after / before - 1));
    expect(high - low).toBeLessThan(5);
    expect(trial.saturatedPct!.change).toEqual({ value: 0, low: 0, high: 0 });
    expect(trial.sentence).toContain(verdict);
  });

  test('are worse when the output is at its limit far more often, whatever the error', () => {
    const limited = moves(20, 1).map((move, i) => ({ ...move, saturatedPct: 10 + (i % 5) }));
    expect(compareMoves(moves(20, 1), limited, START).verdict).toBe('worse');
  });

  test('wait until there are eight of a kind on both sides', () => {
    for (const [before, after] of [
      [LEAST_MOVES - 1, 50],
      [50, LEAST_MOVES - 1],
      [0, 0],
    ] as const)
      expect(compareMoves(moves(before, 1), moves(after, 2), START)).toMatchObject({
        verdict: 'waiting',
        peakFollowingError: null,
        moves: { before, after },
      });
    expect(compareMoves(moves(LEAST_MOVES, 1), moves(LEAST_MOVES, 2), START).verdict).toBe('worse');
  });

  test('of another distance, duration or direction are not compared', () => {
    for (const kind of [{ distance: 270 }, { duration: 0.96 }, { distance: -250 }])
      expect(compareMoves(moves(40, 1), moves(40, 9, kind), START)).toMatchObject({
        verdict: 'waiting',
        moves: { before: 0, after: 0 },
      });
    // Within 5 % they are the same move.
    expect(compareMoves(moves(40, 1), moves(40, 9, { distance: 259, duration: 0.87 }), START).verdict).toBe(
      'worse',
    );
  });

  test('of several kinds pool, and another mix of them is no difference', () => {
    const long = { distance: 250 };
    const short = { distance: 40, duration: 0.3 };
    const before = [...moves(30, 0.2, short), ...moves(10, 1, long)];
    // More of the long ones, each 3 % larger.
    const after = [...moves(10, 0.206, short), ...moves(60, 1.03, long)];
    const trial = compareMoves(before, after, START);
    expect(trial.verdict).toBe('no different');
    expect(trial.peakFollowingError!.after / trial.peakFollowingError!.before).toBeCloseTo(1.03, 1);
    const worse = compareMoves(before, [...moves(10, 0.3, short), ...moves(60, 1.5, long)], START);
    expect(worse.verdict).toBe('worse');
  });
});

describe('the checklist', () => {
  const all = Object.fromEntries(CHECKLIST.map(({ key }) => [key, true]));
  const missing = (confirmed: Record<string, unknown>): string[] =>
    missingFrom(CHECKLIST, confirmed).map(({ key }) => key);
  test('is complete only with every item confirmed', () => {
    expect(missing(all)).toEqual([]);
    for (const { key } of CHECKLIST) {
      expect(missing({ ...all, [key]: false })).toEqual([key]);
      expect(missing({ ...all, [key]: 'true' })).toEqual([key]);
      expect(missing(Object.fromEntries(Object.entries(all).filter(([name]) => name !== key)))).toEqual([
        key,
      ]);
    }
    expect(missing({})).toHaveLength(CHECKLIST.length);
  });
});
