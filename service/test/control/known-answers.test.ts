import { describe, expect, test } from 'vitest';
import { margins } from '../../src/control/frequency-response.js';
import { closedLoop, isStable, steadyErrors } from '../../src/control/loop.js';
import { roots } from '../../src/control/polynomial.js';
import {
  patternDamping,
  patternFrequency,
  patternPolynomial,
  placeGains,
  type Gains,
  type PolePattern,
} from '../../src/control/pole-placement.js';
import { sampledPoles } from '../../src/control/sampled-loop.js';
import { stepFigures } from '../../src/control/step-response.js';

/**
 * Answers derived by hand from the algebra of the loop, K α = b:
 * Δ(s) = s³ + (α + bKd)s² + bKp s + bKi against (s + λ)³. The derivation stands beside each test.
 */
const plant = { gain: 8, pole: 25 };
const triple = (lambda: number): PolePattern => ({ kind: 'triple', lambda });
const place = (lambda: number, structure: 'PID' | 'PI-D' | 'I-PD' = 'PID', pole = 25): Gains =>
  placeGains({ gain: 8, pole }, structure, triple(lambda), false);

describe('gains', () => {
  test('triple pole: Kp = 3λ²/(Kα), Ki = λ³/(Kα), Kd = (3λ − α)/(Kα)', () => {
    expect(place(40)).toEqual({ kp: 4800 / 200, ki: 64_000 / 200, kd: 95 / 200, kv: 0, ka: 0 });
  });
  test('Kd changes sign at λ = α/3 and is exactly 0 there', () => {
    expect(place(25 / 3).kd).toBe(0);
    expect(place(8).kd).toBeLessThan(0);
    expect(place(9).kd).toBeGreaterThan(0);
  });
  test('normalised polynomials: Butterworth, ITAE (Graham & Lathrop 1953), Bessel with d₀ = ω³', () => {
    expect(patternPolynomial({ kind: 'butterworth', omega: 2 })).toEqual([8, 8, 4, 1]);
    expect(patternPolynomial({ kind: 'itae', omega: 2 })).toEqual([8, 8.6, 3.5, 1]);
    // reverse Bessel s³ + 6s² + 15s + 15, ω = ∛15: nothing is scaled
    const bessel = patternPolynomial({ kind: 'bessel', omega: Math.cbrt(15) });
    [15, 15, 6, 1].forEach((c, i) => expect(bessel[i]).toBeCloseTo(c, 12));
  });
  test('damping of the normalised polynomials is that of their roots', () => {
    for (const kind of ['butterworth', 'itae', 'bessel'] as const) {
      const pattern: PolePattern = { kind, omega: 30 };
      const pair = roots(patternPolynomial(pattern)).find((z) => z.im > 0)!;
      expect(patternDamping(pattern)).toBeCloseTo(-pair.re / Math.hypot(pair.re, pair.im), 10);
      expect(patternFrequency(pattern)).toBe(30);
    }
  });
});

describe('step, triple pole', () => {
  const lambda = 40;
  test('I-PD: y = 1 − e^(−x)(1 + x + x²/2), x = λt: no overshoot, 2 % at x = 7.517', () => {
    const step = stepFigures(plant, place(lambda, 'I-PD'), 'I-PD');
    expect(step.overshootPct).toBe(0);
    expect(step.peakTime).toBeNull();
    // the settling point solves e^(−x)(1 + x + x²/2) = 0.02
    const x = lambda * step.settlingTime!;
    expect(Math.exp(-x) * (1 + x + (x * x) / 2)).toBeCloseTo(0.02, 12);
    expect(x).toBeCloseTo(7.517, 3);
  });
  test('I-PD: −3 dB at λ√(2^⅓ − 1) in the half-power convention, |T|² = (1 + (ω/λ)²)⁻³', () => {
    const bandwidth = 2 * Math.PI * closedLoop(plant, place(lambda, 'I-PD'), 'I-PD').bandwidthHz!;
    // −3 dB is 10^(−0.3), not ½: (1 + (ω/λ)²)³ = 10^0.3
    expect(bandwidth / lambda).toBeCloseTo(Math.sqrt(10 ** 0.1 - 1), 10);
    expect(Math.abs(bandwidth / lambda - Math.sqrt(2 ** (1 / 3) - 1))).toBeLessThan(1.2e-3);
  });
  // E(s) = (1 − T)/s = s(s + 3λ)/(s + λ)³ does not know α; e' = 0 at λt = 3 with e = −5e⁻³
  test.each([4, 25, 119, 121, 400])('PI-D: overshoot exactly 5e⁻³ at λt = 3, α = %d', (pole) => {
    const step = stepFigures({ gain: 8, pole }, place(lambda, 'PI-D', pole), 'PI-D');
    expect(step.overshootPct).toBeCloseTo(500 * Math.exp(-3), 9);
    expect(lambda * step.peakTime!).toBeCloseTo(3, 6);
  });
  test('PID: overshoot 20.6 % as α/λ → 0, e⁻² at λ = α, 24.9 % at λ = α/3', () => {
    const overshoot = (pole: number): number =>
      stepFigures({ gain: 8, pole }, place(lambda, 'PID', pole), 'PID').overshootPct!;
    // e(x) = e^(−x)(1 − 2x + x²/2) for α = 0; its minimum at x = 3 − √3
    const x = 3 - Math.sqrt(3);
    expect(overshoot(0.001)).toBeCloseTo(-100 * Math.exp(-x) * (1 - 2 * x + (x * x) / 2), 2);
    expect(overshoot(40)).toBeCloseTo(100 * Math.exp(-2), 9);
    expect(overshoot(120)).toBeCloseTo(500 * Math.exp(-3), 9);
  });
  test('PID with Kd < 0 first moves the wrong way', () => {
    const slow = stepFigures(plant, place(5), 'PID');
    expect(slow.undershootPct).toBeGreaterThan(0.5);
    expect(stepFigures(plant, place(40), 'PID').undershootPct).toBe(0);
  });
});

describe('steady-state errors, triple pole', () => {
  const lambda = 40;
  const l3 = lambda ** 3;
  test('PID: ramp 0, acceleration α/λ³', () => {
    const errors = steadyErrors(plant, place(lambda), 'PID');
    expect(errors.ramp).toBe(0);
    expect(errors.acceleration).toBeCloseTo(25 / l3, 15);
  });
  test('PI-D: ramp 0, acceleration 3/λ²', () => {
    const errors = steadyErrors(plant, place(lambda), 'PI-D');
    expect(errors.ramp).toBe(0);
    expect(errors.acceleration).toBeCloseTo(3 / lambda ** 2, 15);
  });
  test('I-PD: ramp 3/λ, acceleration without bound', () => {
    expect(steadyErrors(plant, place(lambda), 'I-PD')).toEqual({
      ramp: expect.closeTo(3 / lambda, 14) as number,
      acceleration: null,
    });
  });
  test('full feed-forward: T = 1 for PID and PI-D; the I-PD ramp error stays', () => {
    for (const structure of ['PID', 'PI-D'] as const) {
      const gains = placeGains(plant, structure, triple(lambda), true);
      expect(steadyErrors(plant, gains, structure)).toEqual({ ramp: 0, acceleration: 0 });
      const loop = closedLoop(plant, gains, structure);
      expect(loop.peakDb).toBeCloseTo(0, 9);
      expect(loop.bandwidthHz).toBeNull();
      expect(loop.zeros).toHaveLength(3);
      expect(stepFigures(plant, gains, structure)).toMatchObject({
        overshootPct: 0,
        riseTime: 0,
        settlingTime: 0,
      });
    }
    const gains = placeGains(plant, 'I-PD', triple(lambda), true);
    expect(steadyErrors(plant, gains, 'I-PD').ramp).toBeCloseTo(3 / lambda, 14);
  });
});

describe('loop gain', () => {
  const scaled = (gains: Gains, g: number): Gains => ({
    ...gains,
    kp: gains.kp * g,
    ki: gains.ki * g,
    kd: gains.kd * g,
  });
  test('may fall to (λ/3 − α)/(3λ − α) by Routh: (α + gbKd)gbKp > gbKi', () => {
    const lambda = 200;
    const limit = (lambda / 3 - 25) / (3 * lambda - 25);
    const gains = place(lambda);
    expect(isStable(plant, scaled(gains, limit * 1.001))).toBe(true);
    expect(isStable(plant, scaled(gains, limit * 0.999))).toBe(false);
    expect(margins(plant, gains).gainMarginLowDb).toBeCloseTo(20 * Math.log10(limit), 9);
    expect((1e5 / 3 - 25) / (3e5 - 25)).toBeCloseTo(1 / 9, 3);
  });
  test('never makes it unstable for λ ≤ 3α', () => {
    for (const lambda of [30, 60, 75]) {
      expect(margins(plant, place(lambda)).gainMarginLowDb).toBeNull();
      expect(isStable(plant, scaled(place(lambda), 1e-6))).toBe(true);
    }
  });
  test('a triple pole moves as the cube root: 1 % of K moves the roots by about 20 % of λ', () => {
    const poles = closedLoop({ gain: 8.08, pole: 25 }, place(40), 'PID').poles;
    const furthest = Math.max(...poles.map((z) => Math.hypot(z.re + 40, z.im))) / 40;
    expect(furthest).toBeGreaterThan(0.15);
    expect(furthest).toBeLessThan(0.27);
  });
});

test('the sampled loop has the eigenvalues of its state matrix', () => {
  // states y, v, I, y₋₁ as in the reference's note, one step of the recursion per unit vector
  const T = 0.001;
  const { kp, ki, kd } = place(40);
  const a = Math.exp(-25 * T);
  const step = ([y = 0, v = 0, i = 0, last = 0]: number[]): number[] => {
    const sum = i - ki * T * y;
    const u = -kp * y + sum - (kd * (y - last)) / T;
    return [y + ((1 - a) / 25) * v + 8 * (T - (1 - a) / 25) * u, a * v + 8 * (1 - a) * u, sum, y];
  };
  const columns = [0, 1, 2, 3].map((k) => step([0, 1, 2, 3].map((j) => (j === k ? 1 : 0))));
  const trace = columns.reduce((s, c, k) => s + c[k]!, 0);
  const poles = sampledPoles(plant, place(40), T);
  expect(poles.reduce((s, z) => s + z.re, 0)).toBeCloseTo(trace, 12);
  for (const z of poles.filter((p) => p.im === 0)) {
    // a real eigenvalue: det(A − zI) = 0 by elimination
    const m = [0, 1, 2, 3].map((r) => columns.map((c, k) => c[r]! - (r === k ? z.re : 0)));
    let determinant = 1;
    for (let p = 0; p < 4; p++) {
      const pivot = m
        .slice(p)
        .reduce((b, row, k) => (Math.abs(row[p]!) > Math.abs(m[b]![p]!) ? p + k : b), p);
      [m[p], m[pivot]] = [m[pivot]!, m[p]!];
      determinant *= m[p]![p]!;
      for (let r = p + 1; r < 4; r++) {
        const f = m[r]![p]! / m[p]![p]!;
        for (let c = p; c < 4; c++) m[r]![c]! -= f * m[p]![c]!;
      }
    }
    expect(Math.abs(determinant)).toBeLessThan(1e-12);
  }
});
