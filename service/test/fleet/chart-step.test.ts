import fc from 'fast-check';
import { expect, test } from 'vitest';
import { chartStep } from '../../src/fleet/chart-step.js';

const NOW = 1_764_600_000;
const HOUR = 3_600;
const DAY = 24 * HOUR;
const KEPT = { seconds: 2 * HOUR, minutes: 60 * DAY, hours: 1_095 * DAY, estimates: 0, alertCaptures: 0 };
const UNIT = { second: 1, minute: 60, hour: HOUR };

const step = (reach: number, points = 600): ReturnType<typeof chartStep> =>
  chartStep(NOW - reach, NOW, points, KEPT, NOW);

test('the step is easy to read and the roll-up the coarsest that adds up to it', () => {
  expect(step(600)).toEqual({ step: 1, resolution: 'second' });
  expect(step(HOUR)).toEqual({ step: 10, resolution: 'second' });
  expect(step(DAY)).toEqual({ step: 180, resolution: 'minute' });
  expect(step(30 * DAY)).toEqual({ step: 2 * HOUR, resolution: 'hour' });
  expect(step(90 * DAY)).toEqual({ step: 4 * HOUR, resolution: 'hour' });
  expect(step(1_000 * DAY, 100)).toEqual({ step: 10 * DAY, resolution: 'hour' });
});

test('what is no longer kept by the second is shown by the minute, and so on', () => {
  expect(chartStep(NOW - 5 * HOUR, NOW - 5 * HOUR + 60, 600, KEPT, NOW)).toEqual({
    step: 60,
    resolution: 'minute',
  });
  expect(chartStep(NOW - 61 * DAY, NOW - 61 * DAY + 60, 600, KEPT, NOW)).toEqual({
    step: HOUR,
    resolution: 'hour',
  });
  expect(chartStep(NOW - 5_000 * DAY, NOW, 1_000, KEPT, NOW)).toEqual({ step: 5 * DAY, resolution: 'hour' });
});

test('whatever the span, no more points than asked for, of whole roll-ups that are still kept', () => {
  fc.assert(
    fc.property(
      fc.integer({ min: 1, max: 2_000 * DAY }),
      fc.double({ min: 0.001, max: 1, noNaN: true }),
      fc.integer({ min: 1, max: 1_000 }),
      (reach, share, points) => {
        const from = NOW - reach;
        const { step, resolution } = chartStep(from, from + share * reach, points, KEPT, NOW);
        expect((share * reach) / step).toBeLessThanOrEqual(points);
        expect(step % UNIT[resolution]).toBe(0);
        if (resolution !== 'hour') expect(KEPT[`${resolution}s`]).toBeGreaterThanOrEqual(reach);
      },
    ),
  );
});
