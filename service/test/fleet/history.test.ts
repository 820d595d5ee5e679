import { DataSource } from 'typeorm';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { dataSourceOptions } from '../../src/database/data-source.js';
import type { Axis } from '../../src/fleet/axis.entity.js';
import { HistoryService } from '../../src/fleet/history.service.js';
import { IndicatorMinute } from '../../src/indicators/indicator-rollup.entity.js';
import { addUp, indicatorsOf } from '../../src/indicators/indicators.js';
import { PlantEstimateRow } from '../../src/indicators/plant-estimate.entity.js';
import type { RetentionSettings } from '../../src/storage/retention-settings.service.js';

const DAY = 86_400;
const T = Math.floor(Date.now() / 1000 / DAY) * DAY - 2 * DAY;
const AXIS = { id: 7 } as Axis;
const span = { from: new Date(T * 1000), to: new Date((T + DAY) * 1000), limit: 100 };

let dataSource: DataSource;
let history: HistoryService;
let minutes: IndicatorMinute[];

beforeAll(async () => {
  dataSource = await new DataSource(dataSourceOptions(':memory:')).initialize();
  history = new HistoryService(dataSource, {
    get: () => ({
      seconds: 7_200,
      minutes: 60 * DAY,
      hours: 900 * DAY,
      estimates: 900 * DAY,
      alertCaptures: DAY,
    }),
  } as unknown as RetentionSettings);
  let seed = 1;
  const some = (): number => (seed = (seed * 48_271) % 2_147_483_647) / 2_147_483_647;
  // A day of minutes with a hole of an hour, and a neighbour's that must have no part in it.
  minutes = Array.from({ length: 1_440 }, (_, k) => ({
    axisId: 7,
    t: T + 60 * k,
    samples: 60_000,
    movingSamples: Math.floor(some() * 60_000),
    peakMovingError: some(),
    sumSquaredMovingError: some() * 1e4,
    peakStandingError: some(),
    sumSquaredStandingError: some(),
    saturatedSamples: Math.floor(some() * 100),
    peakOutput: 100 * some(),
    sumSquaredOutput: some() * 1e7,
    sumSquaredActivity: some() * 1e6,
    activityCrossings: Math.floor(some() * 9_000),
    coveredSeconds: 60,
    gaps: k % 7,
  })).filter(({ t }) => t < T + 5 * 3_600 || t >= T + 6 * 3_600);
  const repository = dataSource.getRepository(IndicatorMinute);
  await repository.save([...minutes, ...minutes.map((row) => ({ ...row, axisId: 8 }))], { chunk: 60 });
});
afterAll(() => dataSource?.destroy());

test('a chart’s points are its minutes added up, to the digit; a hole stays a hole', async () => {
  const { items, nextCursor } = await history.indicators(AXIS, {
    ...span,
    resolution: 'minute',
    points: 100,
  });
  expect(nextCursor).toBeNull();
  const step = 15 * 60;
  const starts = [...new Set(minutes.map(({ t }) => t - (t % step)))];
  expect(items.map(({ at }) => at.getTime() / 1000)).toEqual(starts);
  expect(starts).toHaveLength(96 - 4);
  for (const point of items) {
    const t = point.at.getTime() / 1000;
    const sums = addUp(minutes.filter((row) => row.t >= t && row.t < t + step));
    const { gaps, peakOutput, peakFollowingError, samples, ...rms } = {
      ...indicatorsOf(sums),
      samples: sums.samples,
    };
    expect(point).toMatchObject({ gaps, peakOutput, peakFollowingError, samples });
    for (const [name, value] of Object.entries(rms))
      expect(point[name as 'outputRms']).toBeCloseTo(value!, 9);
  }
});

test('without points every minute comes, page by page', async () => {
  const { items, nextCursor } = await history.indicators(AXIS, { ...span, resolution: 'minute' });
  expect(items).toHaveLength(100);
  expect(nextCursor).toBe(String(minutes[99]!.t));
});

test('of estimates the newest of each stretch comes, the very last among them', async () => {
  const repository = dataSource.getRepository(PlantEstimateRow);
  const value = (at: number) => ({ gain: { value: at } }) as unknown as PlantEstimateRow['estimate'];
  const times = Array.from({ length: 4_000 }, (_, k) => T + 20 * k + 0.25).filter((t) => t < T + DAY);
  await repository.save(
    times.map((t) => ({ axisId: 7, t, estimate: value(t), chart: null })),
    { chunk: 200 },
  );
  const { items, nextCursor } = await history.estimates(AXIS, { ...span, points: 24 });
  expect(nextCursor).toBeNull();
  const newest = Array.from({ length: 24 }, (_, k) => times.filter((t) => t <= T + 3_600 * (k + 1)).at(-1)!);
  expect(items.map(({ at }) => at.getTime() / 1000)).toEqual([...new Set(newest)]);
  expect(items.at(-1)!.at.getTime() / 1000).toBe(times.at(-1));
});
