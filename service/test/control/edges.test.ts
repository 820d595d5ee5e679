import { describe, expect, test } from 'vitest';
import { frequencyResponse, margins } from '../../src/control/frequency-response.js';
import { closedLoop, steadyErrors } from '../../src/control/loop.js';
import { roots } from '../../src/control/polynomial.js';
import { placeGains, type Gains, type PolePattern } from '../../src/control/pole-placement.js';
import { maxStableSampleTime, outputRipple, sampledLoop } from '../../src/control/sampled-loop.js';
import { sampledMargins } from '../../src/control/sampled-margins.js';
import { stepFigures } from '../../src/control/step-response.js';
import { Agreement, type Design, gainsOf, label, plantOf, reference } from './reference-data.js';

/** Edges that control libraries got wrong according to their public trackers (python-control numbers). */
const plant = { gain: 8, pole: 25 };
const triple = (lambda: number): PolePattern => ({ kind: 'triple', lambda });
const place = (lambda: number): Gains => placeGains(plant, 'PID', triple(lambda), false);

describe('margins', () => {
  test('a phase that only approaches −180° gives no gain margin (784)', () => {
    // Ki = αKp: L = KαKp(1 + Kd/Kp·s²/(s + α))/s² touches −180° only at ω → 0
    const m = margins(plant, { kp: 10, ki: 250, kd: 0.5, kv: 0, ka: 0 });
    expect(m.gainMarginLowDb).toBeNull();
    expect(m.gainMarginHighDb).toBeNull();
    expect(m.phaseCrossoverHz).toBeNull();
  });
  test('a Kd that is zero to rounding invents no crossover at 10¹⁶ rad/s', () => {
    const gains = { ...place(25 / 3), kd: -1e-17 };
    expect(margins(plant, gains).gainMarginHighDb).toBeNull();
    expect(closedLoop(plant, gains, 'PID').zeros).toHaveLength(1);
  });
  test('crossovers lie on |L| = 1 whatever grid anybody looks at (61, 87)', () => {
    for (const lambda of [4, 40, 400, 4000]) {
      const { gainCrossovers } = margins(plant, place(lambda));
      expect(gainCrossovers.length).toBeGreaterThan(0);
      const at = gainCrossovers.map((c) => c.frequencyHz);
      for (const db of frequencyResponse(plant, place(lambda), 'PID', at).openLoop.magnitudeDb)
        expect(Math.abs(db)).toBeLessThan(1e-9);
    }
  });
  test('a lower gain margin is no instability (947)', () => {
    const m = margins(plant, place(200));
    expect(m.gainMarginLowDb).toBeLessThan(0);
    expect(m.gainMarginHighDb).toBeNull();
    expect(m.phaseMarginDeg).toBeGreaterThan(0);
    expect(m.maxSensitivity).toBe(1);
  });
  test('of a loop that is not stable there are none', () => {
    const unstable = { ...place(200), kp: place(200).kp * 0.05, kd: place(200).kd * 0.05 };
    expect(margins(plant, unstable)).toMatchObject({
      gainMarginHighDb: null,
      gainMarginLowDb: null,
      maxSensitivity: null,
      delayMargin: null,
    });
    expect(stepFigures(plant, unstable, 'PID').settlingTime).toBeNull();
    expect(steadyErrors(plant, unstable, 'PID')).toEqual({ ramp: null, acceleration: null });
    expect(maxStableSampleTime(plant, unstable)).toBeNull();
    expect(outputRipple(plant, unstable, 0.001, 0, 0.001)).toBeNull();
  });
  test('zero gains: no crossover, no step, no NaN', () => {
    const none = { kp: 0, ki: 0, kd: 0, kv: 0, ka: 0 };
    expect(margins(plant, none).gainCrossovers).toEqual([]);
    expect(closedLoop(plant, none, 'PID')).toMatchObject({ zeros: [], bandwidthHz: null, peakDb: null });
    expect(stepFigures(plant, none, 'PID').overshootPct).toBeNull();
    expect(sampledLoop(plant, none, { sampleTime: 0.001 }).stable).toBe(false);
  });
  test('without an integrator the loop is of second order', () => {
    const pd = { kp: 3, ki: 0, kd: 0.02, kv: 0, ka: 0 };
    const loop = closedLoop(plant, pd, 'PID');
    // s² + (α + KαKd)s + KαKp
    expect(loop.poles).toHaveLength(2);
    expect(loop.poles[0]!.re + loop.poles[1]!.re).toBeCloseTo(-(25 + 200 * 0.02), 9);
    expect(steadyErrors(plant, pd, 'PID').ramp).toBeCloseTo(25 / 600, 12);
    expect(steadyErrors(plant, pd, 'PI-D').ramp).toBeCloseTo(29 / 600, 12);
    expect(stepFigures(plant, pd, 'PID').overshootPct).toBeGreaterThan(0);
    const sampled = sampledLoop(plant, pd, { sampleTime: 0.001, resolution: 0.001 });
    expect(sampled).toMatchObject({ stable: true });
    expect(sampled.outputRippleRms).toBeGreaterThan(0);
    expect(sampled.maxStableSampleTime).toBeGreaterThan(0.001);
  });
});

interface SampledCase extends Design {
  per_Ts: {
    Ts: number;
    sampled_loop_margins: {
      Ms: number;
      Ms_w_rad_s: number;
      gain_crossovers: { w_rad_s: number; phase_margin_deg: number }[];
      gain_upper_limit: number | null;
      gain_lower_limit: number | null;
    } | null;
  }[];
}

test('crossovers of the sampled loop stay when coefficients differ by many powers of ten (465, 523)', () => {
  const agreement = new Agreement();
  for (const c of reference<SampledCase>('6_sampled_eig'))
    for (const s of c.per_Ts) {
      const at = `${label(c)} ${s.Ts}`;
      const ours = sampledMargins(plantOf(c), gainsOf(c), { sampleTime: s.Ts });
      const theirs = s.sampled_loop_margins;
      // null where the loop is not stable
      if (!theirs) continue;
      agreement.check(`${at} count`, ours.gainCrossovers.length, theirs.gain_crossovers.length, 0);
      theirs.gain_crossovers.forEach((g, i) => {
        agreement.check(`${at} ωc`, ours.gainCrossovers[i]?.frequencyHz, g.w_rad_s / (2 * Math.PI), 1e-6);
        agreement.check(`${at} φm`, ours.gainCrossovers[i]?.phaseMarginDeg, g.phase_margin_deg, 1e-6);
      });
      agreement.check(`${at} Ms`, ours.maxSensitivity, theirs.Ms, 1e-6);
      // the reference's own place of the peak is good to its grid only
      agreement.check(`${at} ωMs`, ours.maxSensitivityHz, theirs.Ms_w_rad_s / (2 * Math.PI), 5e-4);
      agreement.check(`${at} high`, ours.gainLimitHigh, theirs.gain_upper_limit, 1e-6);
      agreement.check(`${at} low`, ours.gainLimitLow, theirs.gain_lower_limit, 1e-6);
    }
  expect(agreement.found).toEqual([]);
  expect(agreement.compared).toBeGreaterThan(39 * 5 * 6);
  // 1 µs sampling of a slow loop: b₁ and the leading coefficient are 12 powers of ten apart
  const slow = sampledMargins(plant, place(4), { sampleTime: 1e-6 });
  expect(slow.gainCrossovers[0]!.frequencyHz).toBeCloseTo(margins(plant, place(4)).gainCrossoverHz!, 4);
});

describe('step figures', () => {
  test('overshoot is against the final value, not the last computed sample (554)', () => {
    // ζ = 0.02: long after the peak the response still swings
    const pattern: PolePattern = { kind: 'pair', pole: 2000, zeta: 0.02, omega: 10 };
    const gains = placeGains(plant, 'I-PD', pattern, false);
    const step = stepFigures(plant, gains, 'I-PD');
    expect(step.overshootPct).toBeCloseTo(100 * Math.exp((-Math.PI * 0.02) / Math.sqrt(1 - 0.02 ** 2)), 1);
  });
  test('settling is the last passage of the band, not the first', () => {
    const pattern: PolePattern = { kind: 'pair', pole: 2000, zeta: 0.02, omega: 10 };
    const gains = placeGains(plant, 'I-PD', pattern, false);
    // envelope e^(−ζωt) = 0.02: the last passage is within half a period before it
    const envelope = Math.log(50) / (0.02 * 10);
    const step = stepFigures(plant, gains, 'I-PD');
    expect(step.settlingTime).toBeLessThan(envelope + 0.01);
    expect(step.settlingTime).toBeGreaterThan(envelope - Math.PI / 10);
  });
  test('a response that hardly decays does not settle, instead of settling at the end of a grid (337)', () => {
    const pattern: PolePattern = { kind: 'pair', pole: 2000, zeta: 1e-6, omega: 10 };
    const gains = placeGains(plant, 'I-PD', pattern, false);
    expect(stepFigures(plant, gains, 'I-PD').settlingTime).toBeNull();
  });
  test('no undershoot without an inverse response (590)', () => {
    for (const structure of ['PI-D', 'I-PD'] as const)
      for (const lambda of [5, 40, 400])
        expect(stepFigures(plant, place(lambda), structure).undershootPct).toBe(0);
  });
  test('figures scale with time and know no time vector (591)', () => {
    const slow = stepFigures(
      { gain: 8, pole: 25e-3 },
      placeGains({ gain: 8, pole: 25e-3 }, 'PID', triple(0.04), false),
      'PID',
    );
    const fast = stepFigures(plant, place(40), 'PID');
    expect(slow.overshootPct! / fast.overshootPct!).toBeCloseTo(1, 9);
    expect(slow.settlingTime! / fast.settlingTime!).toBeCloseTo(1000, 5);
    expect(slow.riseTime! / fast.riseTime!).toBeCloseTo(1000, 5);
  });
  test('poles 10⁴ apart', () => {
    const gains = placeGains(plant, 'I-PD', { kind: 'real', poles: [0.1, 900, 1000] }, false);
    const step = stepFigures(plant, gains, 'I-PD');
    expect(step.overshootPct).toBe(0);
    expect(step.settlingTime! * 0.1).toBeCloseTo(Math.log(50), 3);
  });
});

describe('roots', () => {
  const product = (...list: number[]): number[] =>
    list.reduce<number[]>((p, r) => [...p.map((c, i) => -r * c + (p[i - 1] ?? 0)), p.at(-1)!], [1]);
  test('multiple real roots come back equal', () => {
    for (const list of [
      [-40, -40, -40],
      [-40, -40, -41],
      [-7, -7, -1000],
      [-3, -3, -3, -3],
      [-2, -2, -5, -5],
    ]) {
      const found = roots(product(...list))
        .map((z) => z.re)
        .sort((a, b) => a - b);
      list.sort((a, b) => a - b).forEach((r, i) => expect(Math.abs(found[i]! / r - 1)).toBeLessThan(1e-9));
    }
  });
  test('a double complex pair comes back as two equal pairs', () => {
    // (s² + 2s + 5)²
    const found = roots([25, 20, 14, 4, 1]);
    expect(found).toHaveLength(4);
    for (const z of found) expect(Math.hypot(z.re + 1, Math.abs(z.im) - 2)).toBeLessThan(1e-12);
  });
  test('close roots that the coefficients can tell apart stay apart', () => {
    const found = roots(product(-40, -40.01, -40.02)).map((z) => z.re);
    expect(new Set(found).size).toBe(3);
  });
  test('roots at 0, leading zeros, constants and what has no roots', () => {
    expect(roots([0, 0, 6, 2])).toEqual([
      { re: 0, im: 0 },
      { re: 0, im: 0 },
      { re: -3, im: 0 },
    ]);
    expect(roots([6, 2, 0, 0])).toEqual([{ re: -3, im: 0 }]);
    expect(roots([5])).toEqual([]);
    expect(() => roots([0, 0])).toThrow(RangeError);
    expect(() => roots([1, NaN])).toThrow(RangeError);
  });
});
