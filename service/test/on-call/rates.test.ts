import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { chatters, floodsOf, loadOf, percentile, waits } from '../../src/on-call/rates.js';

const MINUTE = 60_000;
const times = (count: number, from: number, step: number): number[] =>
  Array.from({ length: count }, (_, i) => from + i * step);

describe('a flood', () => {
  it('is more than ten in ten minutes: eleven are one, ten are none', () => {
    expect(floodsOf(times(10, 0, 1_000))).toEqual([]);
    expect(floodsOf(times(11, 0, 1_000))).toEqual([{ from: 0, to: 10_000, alerts: 11 }]);
    // Eleven over ten minutes to the millisecond are not within ten minutes.
    expect(floodsOf(times(11, 0, MINUTE))).toEqual([]);
    expect(floodsOf(times(11, 0, MINUTE - 1))).toHaveLength(1);
  });

  it('lasts as long as they keep coming, and a second one is a second one', () => {
    const long = times(60, 0, 30_000);
    const later = times(12, 10 * 60 * MINUTE, 1_000);
    expect(floodsOf([...long, ...later])).toEqual([
      { from: 0, to: 59 * 30_000, alerts: 60 },
      { from: later[0], to: later[11], alerts: 12 },
    ]);
  });

  it('holds every alert that has eleven within ten minutes around it, and no flood holds fewer than eleven', () => {
    fc.assert(
      fc.property(fc.array(fc.integer({ min: 0, max: 120 * MINUTE }), { maxLength: 120 }), (some) => {
        const at = some.sort((a, b) => a - b);
        const floods = floodsOf(at);
        for (const { from, to, alerts } of floods) {
          expect(alerts).toBeGreaterThan(10);
          expect(at.filter((t) => t >= from && t <= to).length).toBeGreaterThanOrEqual(alerts);
        }
        for (let i = 0; i + 10 < at.length; i++)
          if (at[i + 10]! - at[i]! < 10 * MINUTE)
            expect(floods.some(({ from, to }) => from <= at[i]! && at[i + 10]! <= to)).toBe(true);
      }),
      { numRuns: 200 },
    );
  });
});

describe('rates', () => {
  it('are judged by the published 150 and 300 a day', () => {
    expect([0, 150, 150.1, 300, 301].map(loadOf)).toEqual([
      'acceptable',
      'acceptable',
      'manageable',
      'manageable',
      'too many',
    ]);
  });

  it('call three times within a minute chattering', () => {
    expect(chatters([0, 30_000])).toBe(false);
    expect(chatters([0, 30_000, 60_000])).toBe(true);
    expect(chatters([0, 30_000, 60_001])).toBe(false);
    expect(chatters([0, 500_000, 510_000, 520_000])).toBe(true);
  });

  it('count the time to the first acknowledgement before the same alert came again', () => {
    const raised = [
      { at: 0, alertId: 1, axisId: 1, rule: 'x' },
      { at: 5, alertId: 2, axisId: 2, rule: 'x' },
      { at: 100, alertId: 1, axisId: 1, rule: 'x' },
      { at: 200, alertId: 3, axisId: 3, rule: 'x' },
    ];
    expect(
      waits(raised, [
        { at: 105, alertId: 2 },
        { at: 130, alertId: 1 },
        { at: 140, alertId: 1 },
      ]),
    ).toEqual([null, 100, 30, null]);
  });

  it('take percentiles by the nearest rank', () => {
    // The five values and ranks of a worked example (nearest-rank method, from memory).
    expect([0.05, 0.3, 0.4, 0.5, 1].map((share) => percentile([50, 35, 20, 15, 40], share))).toEqual([
      15, 20, 20, 35, 50,
    ]);
    expect(percentile([], 0.5)).toBeNull();
  });
});
