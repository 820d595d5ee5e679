import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { addUp, indicatorsOf } from '../../src/indicators/indicators.js';
import { SecondAccumulator, type ClosedSecond } from '../../src/indicators/second-accumulator.js';
import { physicsOf, randomSource, TestAxis } from '../identification/test-axis.js';

const STEP_US = 2_000;
const N = 1e6 / STEP_US;
const SETTINGS = { sampleTime: STEP_US / 1e6, resolution: 0.01, loopFrequency: 30 };
const T0 = 1_700_000_000;

/** Seconds of a signal given sample by sample; one more sample closes the last second. */
function secondsOf(
  seconds: number,
  at: (i: number) => { target: number; position: number; output: number },
  accumulator = new SecondAccumulator(SETTINGS),
): ClosedSecond[] {
  const n = seconds * N + 1;
  const samples = Array.from({ length: n }, (_, i) => at(i));
  const closed: ClosedSecond[] = [];
  accumulator.push(
    Int32Array.from(samples, ({ target }) => target),
    Int32Array.from(samples, ({ position }) => position),
    Int16Array.from(samples, ({ output }) => output),
    T0 * 1e6,
    STEP_US,
    0,
    (second) => closed.push(second),
  );
  return closed;
}

describe('moving and standing', () => {
  test('an axis at rest stands, also with an encoder that flickers by a count', () => {
    const random = randomSource(1);
    const [second] = secondsOf(1, () => ({ target: 500, position: 500 + Math.round(random()), output: 40 }));
    expect(second).toMatchObject({ samples: N, movingSamples: 0, peakMovingError: 0, saturatedSamples: 0 });
    expect(second!.peakStandingError).toBeCloseTo(0.01, 12);
  });

  test('a target that changes moves the axis until 50 ms after its last change', () => {
    // The target climbs by one count a sample for 100 samples; the position stays, so only the target tells.
    const [second] = secondsOf(1, (i) => ({ target: Math.min(i, 100), position: 0, output: 0 }));
    // 100 changes, then 25 samples of 2 ms.
    expect(second!.movingSamples).toBe(100 + 25);
    expect(second!.peakMovingError).toBeCloseTo(1, 12);
    expect(second!.sumSquaredMovingError).toBeCloseTo(
      Array.from({ length: 125 }, (_, i) => (0.01 * Math.min(i + 1, 100)) ** 2).reduce((a, b) => a + b),
      9,
    );
    expect(second!.sumSquaredStandingError).toBeCloseTo((N - 126) * 1, 9); // all but the first sample, which has no error yet
  });

  test('an axis that is pushed off its place moves although its target does not', () => {
    const [second] = secondsOf(1, (i) => ({ target: 0, position: Math.max(0, i - 100), output: 0 }));
    // 1 count a sample is 10 counts in 20 ms; the smoothing passes 4 counts within −20 ms · ln(1 − 0.4) = 10.2 ms.
    expect(second!.movingSamples).toBeGreaterThanOrEqual(N - 100 - 7);
    expect(second!.movingSamples).toBeLessThanOrEqual(N - 100);
  });
});

test('saturation counts moving samples from 99.9 % on, in both directions', () => {
  const output = (i: number): number => [10_000, -9_990, 9_989, -5_000][i % 4]!;
  const [moving] = secondsOf(1, (i) => ({ target: 10 * i, position: 10 * i - 5, output: output(i) }));
  // Sample 0 does not move yet, and it would have counted.
  expect(moving).toMatchObject({ movingSamples: N - 1, saturatedSamples: N / 2 - 1, peakOutput: 100 });
  const [standing] = secondsOf(1, (i) => ({ target: 0, position: 0, output: output(i) }));
  expect(standing).toMatchObject({ movingSamples: 0, saturatedSamples: 0, peakOutput: 100 });
  expect(indicatorsOf(standing!).saturatedPct).toBeNull();
  expect(indicatorsOf(moving!).saturatedPct).toBeCloseTo((100 * (N / 2 - 1)) / (N - 1), 12);
});

describe('output activity', () => {
  /**
   * Gain of the two high-passes: u less its exponential mean m ← m + w(u − m), w = 1 − e^(−ω_c·T), is by its
   * z-transform (1 − w)(1 − z⁻¹)/(1 − (1 − w)z⁻¹), twice, at z = e^(jωT).
   */
  const gain = (hz: number, cutoff: number): number => {
    const keep = Math.exp(-cutoff * SETTINGS.sampleTime);
    const angle = 2 * Math.PI * hz * SETTINGS.sampleTime;
    return (keep * keep * 4 * Math.sin(angle / 2) ** 2) / (1 + keep * keep - 2 * keep * Math.cos(angle));
  };

  test('of a hum is its RMS behind the high-passes, and its frequency is named', () => {
    const hz = 60;
    const amplitude = 8; // %
    const seconds = secondsOf(3, (i) => ({
      target: 0,
      position: 0,
      output: Math.round(100 * amplitude * Math.sin(2 * Math.PI * hz * i * SETTINGS.sampleTime)),
    }));
    const last = indicatorsOf(seconds[2]!);
    const expected = (amplitude / Math.SQRT2) * gain(hz, 3 * SETTINGS.loopFrequency);
    expect(last.outputActivity / expected).toBeCloseTo(1, 2);
    expect(Math.abs(last.dominantHz! - hz)).toBeLessThanOrEqual(1);
    expect(last.outputRms).toBeCloseTo(amplitude / Math.SQRT2, 1);
  });

  test('of ordinary moves with sharp corners stays far below that of a hum', () => {
    const axis = new TestAxis({
      physics: physicsOf({ gain: 12, pole: 20, coulomb: 2, bias: 0.2 }),
      designGain: 12,
      designPole: 20,
      lambda: 30,
      sampleTime: SETTINGS.sampleTime,
      resolution: SETTINGS.resolution,
      noise: 0.003,
      feedForward: true,
      distance: 250,
      speed: 500,
      dwell: 0.6,
      seed: 3,
    });
    const { target, position, output } = axis.run(30);
    const quiet = secondsOf(29, (i) => ({
      target: Math.round(target[i]! / SETTINGS.resolution),
      position: position[i]!,
      output: output[i]!,
    }));
    const humming = secondsOf(29, (i) => ({
      target: Math.round(target[i]! / SETTINGS.resolution),
      position: position[i]!,
      output: Math.max(-10_000, Math.min(10_000, output[i]! + Math.round(700 * Math.sin(0.7 * i)))),
    }));
    const calm = indicatorsOf(addUp(quiet));
    const hum = indicatorsOf(addUp(humming));
    // The rule's default threshold is 3 % RMS.
    expect(calm.movingPct).toBeGreaterThan(30);
    expect(calm.peakOutput).toBeGreaterThan(20);
    expect(calm.outputActivity).toBeLessThan(1.5);
    expect(hum.outputActivity).toBeGreaterThan(3);
    expect(hum.dominantHz! / (0.7 / (2 * Math.PI * SETTINGS.sampleTime))).toBeCloseTo(1, 1);
  });
});

test('how the stream is cut into blocks makes no difference, to the bit', () => {
  const random = randomSource(9);
  const total = 3 * N + 1;
  const target = Int32Array.from({ length: total }, (_, i) => (i % 700 < 300 ? 20 * i : 6_000));
  const position = target.map((r) => r - Math.floor(60 * random()));
  const output = Int16Array.from({ length: total }, () => Math.round(20_000 * (random() - 0.5)) % 10_001);
  const run = (cuts: number[]): { closed: ClosedSecond[]; state: number[] } => {
    const accumulator = new SecondAccumulator(SETTINGS);
    const closed: ClosedSecond[] = [];
    const edges = [0, ...cuts, total];
    for (let k = 0; k + 1 < edges.length; k++)
      accumulator.push(
        target.subarray(edges[k], edges[k + 1]),
        position.subarray(edges[k], edges[k + 1]),
        output.subarray(edges[k], edges[k + 1]),
        T0 * 1e6 + edges[k]! * STEP_US,
        STEP_US,
        0,
        (second) => closed.push(second),
      );
    return { closed, state: Array.from(accumulator.state) };
  };
  const whole = run([]);
  expect(whole.closed.map(({ samples }) => samples)).toEqual([N, N, N]);
  fc.assert(
    fc.property(fc.uniqueArray(fc.integer({ min: 1, max: total - 1 }), { maxLength: 40 }), (cuts) => {
      expect(run([...cuts].sort((a, b) => a - b))).toEqual(whole);
    }),
    { numRuns: 60 },
  );
});

test('a gap is counted, closes no second by itself and carries no motion across', () => {
  const accumulator = new SecondAccumulator(SETTINGS);
  const closed: ClosedSecond[] = [];
  const push = (target: number[], startUs: number): void =>
    accumulator.push(
      Int32Array.from(target),
      Int32Array.from(target),
      new Int16Array(target.length),
      startUs,
      STEP_US,
      0,
      (second) => closed.push(second),
    );
  push([0, 0, 0, 0], T0 * 1e6);
  accumulator.gap();
  // Far away after the gap: nobody saw it move there.
  push([90_000, 90_000, 90_000], T0 * 1e6 + 500_000);
  expect(closed).toEqual([]);
  push([90_000], (T0 + 2) * 1e6);
  expect(closed).toEqual([expect.objectContaining({ t: T0, samples: 7, movingSamples: 0, gaps: 1 })]);
  expect(closed[0]!.coveredSeconds).toBeCloseTo(7 * SETTINGS.sampleTime, 12);
});

describe('indicators', () => {
  test('of nothing are nothing, without a division by zero', () => {
    expect(indicatorsOf(addUp([]))).toEqual({
      peakFollowingError: null,
      rmsFollowingError: null,
      peakStandingError: null,
      saturatedPct: null,
      movingPct: 0,
      outputRms: 0,
      peakOutput: 0,
      outputActivity: 0,
      dominantHz: null,
      gaps: 0,
    });
  });

  test('of several seconds come from their sums: RMS over all samples, peaks the largest', () => {
    const second = (over: Partial<ClosedSecond>): ClosedSecond => ({ ...addUp([]), t: 0, ...over });
    const all = indicatorsOf(
      addUp([
        second({
          samples: 100,
          movingSamples: 40,
          peakMovingError: 0.3,
          sumSquaredMovingError: 1,
          saturatedSamples: 1,
          sumSquaredOutput: 900,
          coveredSeconds: 1,
        }),
        second({
          samples: 100,
          movingSamples: 60,
          peakMovingError: 0.5,
          sumSquaredMovingError: 3,
          saturatedSamples: 4,
          peakStandingError: 0.02,
          sumSquaredOutput: 700,
          sumSquaredActivity: 200 * 4,
          activityCrossings: 100,
          coveredSeconds: 1,
          gaps: 2,
        }),
      ]),
    );
    expect(all).toMatchObject({
      peakFollowingError: 0.5,
      rmsFollowingError: 0.2, // √(4/100)
      saturatedPct: 5,
      movingPct: 50,
      peakStandingError: 0.02,
      outputActivity: 2,
      dominantHz: 25, // 100 sign changes in 2 s
      gaps: 2,
    });
    expect(all.outputRms).toBeCloseTo(Math.sqrt(8), 12);
  });

  test('name no frequency while the output is quiet', () => {
    const quiet = { ...addUp([]), samples: 100, sumSquaredActivity: 100 * 0.19 ** 2, activityCrossings: 50 };
    expect(indicatorsOf({ ...quiet, coveredSeconds: 1 }).dominantHz).toBeNull();
  });
});
