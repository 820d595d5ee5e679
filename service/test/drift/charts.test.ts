import { readFileSync } from 'node:fs';
import { describe, expect, test } from 'vitest';
import { CUSUM_START, cusumRunLength, cusumSignal, updateCusum } from '../../src/drift/cusum.js';
import { createDriftChart, updateDriftChart, type DriftDecision } from '../../src/drift/drift-chart.js';
import { ewmaHalfWidth, updateEwma } from '../../src/drift/ewma.js';
import type { PlantEstimate, WindowEstimate } from '../../src/identification/plant-estimate.js';
import { randomSource } from '../identification/test-axis.js';

const nist = JSON.parse(readFileSync(new URL('../references/8_spc_nist.json', import.meta.url), 'utf8')) as {
  cusum: { target: number; k: number; h: number; rows: { x: number; S_hi: number; S_lo: number }[] };
};

describe('known answers', () => {
  test('CUSUM: NIST/SEMATECH e-Handbook 6.3.2.3 (values from memory, recomputed): first signal at group 14', () => {
    const design = { centre: nist.cusum.target, reference: nist.cusum.k, decision: nist.cusum.h };
    let cusum = CUSUM_START;
    let first = 0;
    nist.cusum.rows.forEach(({ x, S_hi, S_lo }, i) => {
      cusum = updateCusum(cusum, design, x);
      expect(cusum.high).toBeCloseTo(S_hi, 9);
      expect(cusum.low).toBeCloseTo(S_lo, 9);
      if (first === 0 && cusumSignal(cusum, design) !== 0) first = i + 1;
    });
    expect(first).toBe(14);
  });

  test('EWMA: NIST/SEMATECH e-Handbook 6.3.2.4 (values from memory, recomputed)', () => {
    const half = ewmaHalfWidth({ centre: 50, sigma: 2.0539, weight: 0.3, width: 3 });
    expect(50 + half).toBeCloseTo(52.5884, 3);
    expect(50 - half).toBeCloseTo(47.4115, 3);
    let z = 50;
    const averages = [52.0, 47.0, 53.0, 49.3, 50.1].map((x) => (z = updateEwma(z, 0.3, x)));
    [50.6, 49.52, 50.56, 50.18, 50.16].forEach((value, i) => expect(averages[i]!).toBeCloseTo(value, 2));
  });

  test('average run lengths of a two-sided CUSUM, k = ½ (Montgomery, Introduction to SQC; from memory)', () => {
    expect(cusumRunLength(0.5, 4, 0)).toBeCloseTo(168, -0.5);
    expect(cusumRunLength(0.5, 4, 1)).toBeCloseTo(8.38, 1);
    expect(cusumRunLength(0.5, 5, 0)).toBeCloseTo(465, -0.8);
    expect(cusumRunLength(0.5, 5, 1)).toBeCloseTo(10.4, 1);
  });
});

const BASELINE = { gain: 10, pole: 40 };
const TOLERANCES = { gainPct: 15, polePct: 20 };
const SPREAD = { gain: 0.01, pole: 0.02 };

/** Windows and pooled estimates of a plant that is off the baseline by the given ratios. */
function* windows(
  seed: number,
  ratios: () => { gain: number; pole: number },
): Generator<[WindowEstimate, PlantEstimate]> {
  const random = randomSource(seed);
  const normal = (): number => Math.sqrt(-2 * Math.log(random())) * Math.cos(2 * Math.PI * random());
  for (;;) {
    const { gain, pole } = ratios();
    const interval = (value: number, spread: number) => ({
      value,
      low: value * (1 - spread),
      high: value * (1 + spread),
    });
    yield [
      {
        movingSeconds: 5,
        elapsedSeconds: 9,
        lnGain: Math.log(BASELINE.gain * gain) + SPREAD.gain * normal(),
        lnPole: Math.log(BASELINE.pole * pole) + SPREAD.pole * normal(),
        covariance: { gain: SPREAD.gain ** 2, cross: 0, pole: SPREAD.pole ** 2 },
        coulomb: 1,
        bias: 0,
        gainForward: null,
        gainReverse: null,
        outputLimitShare: 0,
      },
      {
        gain: interval(BASELINE.gain * gain, SPREAD.gain),
        pole: interval(BASELINE.pole * pole, SPREAD.pole),
        coulomb: { value: 1, low: 0.9, high: 1.1 },
        bias: { value: 0, low: -0.1, high: 0.1 },
        deadTime: 0,
        lnCovariance: { gain: 1e-5, cross: 0, pole: 4e-5 },
        fitPct: 95,
        movingSeconds: 30,
        verdict: 'usable',
        remarks: [],
      },
    ];
  }
}

function run(
  seed: number,
  count: number,
  ratios: (i: number) => { gain: number; pole: number },
): DriftDecision[][] {
  const chart = createDriftChart(BASELINE, TOLERANCES);
  const stream = windows(seed, () => ratios(i));
  const decisions: DriftDecision[][] = [];
  let i = 0;
  for (; i < count; i++) {
    const [window, pooled] = stream.next().value as [WindowEstimate, PlantEstimate];
    decisions.push(updateDriftChart(chart, window, pooled));
  }
  return decisions;
}

describe('the drift chart', () => {
  test('learns for eight windows, then stays in control while the plant does', () => {
    for (let seed = 1; seed <= 20; seed++) {
      const states = run(seed, 400, () => ({ gain: 1, pole: 1 })).map((both) =>
        both.map(({ state }) => state),
      );
      expect(
        states
          .slice(0, 7)
          .flat()
          .every((state) => state === 'learning'),
      ).toBe(true);
      expect(
        states
          .slice(8)
          .flat()
          .every((state) => state === 'in-control'),
      ).toBe(true);
    }
  });

  test('decides a pole 30 % down within four windows, and names no gain drift', () => {
    for (let seed = 1; seed <= 20; seed++) {
      const decisions = run(seed, 40, (i) => ({ gain: 1, pole: i < 20 ? 1 : 0.7 }));
      const decided = decisions.findIndex(([, pole]) => pole!.state === 'drifted');
      expect(decided).toBeGreaterThanOrEqual(20);
      expect(decided).toBeLessThan(24);
      expect(decisions.every(([gain]) => gain!.state !== 'drifted')).toBe(true);
      expect(decisions.at(-1)![1]!.direction).toBe(-1);
    }
  });

  test('takes a decision back only inside the deadband', () => {
    const [, back, well] = [run(3, 80, ratio(0.7)), run(3, 80, ratio(0.83)), run(3, 80, ratio(0.9))].map(
      (decisions) => decisions.at(-1)![1]!.state,
    );
    // 17 % off is within the tolerance of 20 % but not within four fifths of it.
    expect(back).toBe('drifted');
    expect(well).not.toBe('drifted');
    function ratio(end: number) {
      return (i: number) => ({ gain: 1, pole: i < 20 ? 1 : i < 50 ? 0.7 : end });
    }
  });

  test('a plant that was off from the start is not learnt away', () => {
    const decisions = run(5, 14, () => ({ gain: 0.7, pole: 1 }));
    expect(decisions.at(-1)![0]!.state).toBe('drifted');
  });

  test('decides nothing on an estimate that is in doubt', () => {
    const chart = createDriftChart(BASELINE, TOLERANCES);
    const stream = windows(1, () => ({ gain: 0.6, pole: 0.6 }));
    for (let i = 0; i < 30; i++) {
      const [window, pooled] = stream.next().value as [WindowEstimate, PlantEstimate];
      for (const { state } of updateDriftChart(chart, window, { ...pooled, verdict: 'doubtful' }))
        expect(state).not.toBe('drifted');
    }
  });
});
