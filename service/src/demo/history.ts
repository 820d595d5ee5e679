import type { EntityManager } from 'typeorm';
import type { Axis } from '../fleet/axis.entity.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';
import { IndicatorHour } from '../indicators/indicator-rollup.entity.js';
import { PlantEstimateRow } from '../indicators/plant-estimate.entity.js';

const DAYS = 30;
const HOUR = 3_600;
/** Estimates a day in the made-up month. */
const ESTIMATES_PER_DAY = 4;
const ROWS_PER_INSERT = 200;

/**
 * A month of made-up history, so that charts are not empty: hourly indicators and four estimates a day that wander
 * within a few per cent of the baseline. It ends an hour before the demo starts; everything after is measured.
 */
export async function writeHistory(manager: EntityManager, axes: readonly Axis[], now: Date): Promise<void> {
  const end = Math.floor(now.getTime() / 1000 / HOUR) * HOUR - HOUR;
  const start = end - DAYS * 24 * HOUR;
  for (const axis of axes) {
    const random = seeded(axis.id);
    await insertInParts(manager, IndicatorHour, hours(axis, start, end, random));
    await insertInParts(manager, PlantEstimateRow, estimates(axis, start, end, random));
  }
}

async function insertInParts<T extends object>(
  manager: EntityManager,
  entity: new () => T,
  rows: T[],
): Promise<void> {
  for (let i = 0; i < rows.length; i += ROWS_PER_INSERT)
    await manager
      .createQueryBuilder()
      .insert()
      .into(entity)
      .values(rows.slice(i, i + ROWS_PER_INSERT) as never)
      .updateEntity(false)
      .execute();
}

function hours(axis: Axis, start: number, end: number, random: () => number): IndicatorHour[] {
  const rows: IndicatorHour[] = [];
  const usual = axis.tolerances.followingError * (0.25 + 0.2 * random());
  for (let t = start; t < end; t += HOUR) {
    // Two shifts; the works stand from 22:00 to 06:00 and on Sundays.
    const clock = new Date(t * 1000);
    const works = clock.getUTCDay() !== 0 && clock.getUTCHours() >= 6 && clock.getUTCHours() < 22;
    const samples = Math.round(HOUR / axis.sampleTime);
    const movingSamples = works ? Math.round(samples * (0.45 + 0.1 * random())) : 0;
    const peak = works ? usual * (0.9 + 0.3 * random()) : 0;
    const standing = axis.resolution * (1 + Math.floor(3 * random()));
    rows.push({
      axisId: axis.id,
      t,
      samples,
      movingSamples,
      peakMovingError: peak,
      sumSquaredMovingError: movingSamples * (peak / 3.2) ** 2,
      peakStandingError: standing,
      sumSquaredStandingError: (samples - movingSamples) * (standing / 2) ** 2,
      saturatedSamples: 0,
      peakOutput: works ? 55 + 15 * random() : 3,
      sumSquaredOutput: movingSamples * (18 + 4 * random()) ** 2,
      sumSquaredActivity: samples * (0.2 + 0.1 * random()) ** 2,
      activityCrossings: 0,
      coveredSeconds: HOUR,
      gaps: 0,
    });
  }
  return rows;
}

function estimates(axis: Axis, start: number, end: number, random: () => number): PlantEstimateRow[] {
  const { gain, pole, coulomb, bias } = axis.baseline!;
  const step = (24 * HOUR) / ESTIMATES_PER_DAY;
  const rows: PlantEstimateRow[] = [];
  let lnGain = 0;
  let lnPole = 0;
  for (let t = start + step; t < end; t += step) {
    lnGain = 0.85 * lnGain + 0.006 * (random() - 0.5);
    lnPole = 0.85 * lnPole + 0.014 * (random() - 0.5);
    const around = (value: number, half: number) => ({ value, low: value - half, high: value + half });
    const spread = { gain: 0.004, pole: 0.01 };
    const k = gain * Math.exp(lnGain);
    const a = pole * Math.exp(lnPole);
    const estimate: PlantEstimate = {
      gain: around(k, 1.96 * spread.gain * k),
      pole: around(a, 1.96 * spread.pole * a),
      coulomb: around((coulomb ?? 1) * (0.97 + 0.06 * random()), 0.06),
      bias: around((bias ?? 0) + 0.04 * (random() - 0.5), 0.05),
      deadTime: 0,
      lnCovariance: { gain: spread.gain ** 2, cross: 0, pole: spread.pole ** 2 },
      fitPct: 95 + 2 * random(),
      movingSeconds: 40,
      verdict: 'usable',
      remarks: ['Made up for the demo'],
    };
    rows.push({ axisId: axis.id, t, estimate, chart: null });
  }
  return rows;
}

/** mulberry32: small, seeded, good enough for made-up figures. */
function seeded(seed: number): () => number {
  let state = seed * 0x9e3779b9;
  return () => {
    state = (state + 0x6d2b79f5) | 0;
    let x = Math.imul(state ^ (state >>> 15), 1 | state);
    x = (x + Math.imul(x ^ (x >>> 7), 61 | x)) ^ x;
    return ((x ^ (x >>> 14)) >>> 0) / 4_294_967_296;
  };
}
