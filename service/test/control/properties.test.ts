import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { design, type DesignQuestion } from '../../src/control/design.js';
import { margins } from '../../src/control/frequency-response.js';
import { closedLoop, closedLoopPoles, steadyErrors } from '../../src/control/loop.js';
import { simulateMove } from '../../src/control/move.js';
import type { Plant } from '../../src/control/plant.js';
import {
  patternPolynomial,
  placeGains,
  scalePattern,
  STRUCTURES,
  type PolePattern,
  type Structure,
} from '../../src/control/pole-placement.js';
import { sampledPoles } from '../../src/control/sampled-loop.js';
import { stepFigures } from '../../src/control/step-response.js';

const logarithmic = (low: number, high: number): fc.Arbitrary<number> =>
  fc.double({ min: Math.log(low), max: Math.log(high), noNaN: true }).map(Math.exp);

const plants = fc.record({ gain: logarithmic(0.1, 100), pole: logarithmic(1, 300) });
const patterns: fc.Arbitrary<PolePattern> = fc.oneof(
  fc.record({ kind: fc.constant('triple' as const), lambda: logarithmic(2, 300) }),
  fc.record({
    kind: fc.constant('real' as const),
    poles: fc.tuple(logarithmic(2, 300), logarithmic(2, 300), logarithmic(2, 300)),
  }),
  fc.record({
    kind: fc.constant('pair' as const),
    pole: logarithmic(2, 300),
    zeta: fc.double({ min: 0.1, max: 0.95, noNaN: true }),
    omega: logarithmic(2, 300),
  }),
  fc.record({ kind: fc.constantFrom('butterworth', 'itae', 'bessel'), omega: logarithmic(2, 300) }),
);
const structures = fc.constantFrom(...STRUCTURES);
const runs = { numRuns: 60 };

const near = (a: number | null, b: number | null, relative: number, absolute = 1e-12): boolean =>
  a === null || b === null
    ? a === b
    : Math.abs(a - b) <= relative * Math.max(Math.abs(a), Math.abs(b)) + absolute;

describe('properties', () => {
  test('placing and then analysing gives back the poles: Δ at every one of them is rounding', () => {
    fc.assert(
      fc.property(plants, structures, patterns, (plant, structure, pattern) => {
        const gains = placeGains(plant, structure, pattern, false);
        const wanted = patternPolynomial(pattern);
        const poles = closedLoopPoles(plant, gains);
        expect(poles).toHaveLength(3);
        // the product (s − z₁)(s − z₂)(s − z₃) is the pattern's polynomial
        const sum = poles.reduce((s, z) => s + z.re, 0);
        const squares = poles.reduce((s, z) => s + z.re * z.re - z.im * z.im, 0);
        const [a, b, c] = poles as [(typeof poles)[0], (typeof poles)[0], (typeof poles)[0]];
        const ab = { re: a.re * b.re - a.im * b.im, im: a.re * b.im + a.im * b.re };
        expect(near(-sum, wanted[2]!, 1e-9, 1e-12 * plant.pole)).toBe(true);
        expect(near((sum * sum - squares) / 2, wanted[1]!, 1e-9, 1e-12 * plant.pole ** 2)).toBe(true);
        expect(near(-(ab.re * c.re - ab.im * c.im), wanted[0]!, 1e-9)).toBe(true);
      }),
      runs,
    );
  });

  test('a triple pole comes back as three equal reals to 1e-9', () => {
    fc.assert(
      fc.property(plants, logarithmic(2, 300), (plant, lambda) => {
        // Kd = (3λ − α)/(Kα) keeps the digits of λ only while α is not far above it
        fc.pre(plant.pole < 30 * lambda);
        const poles = closedLoopPoles(plant, placeGains(plant, 'PID', { kind: 'triple', lambda }, false));
        for (const z of poles) {
          expect(z.im).toBe(0);
          expect(near(z.re, -lambda, 1e-9)).toBe(true);
        }
      }),
      runs,
    );
  });

  test('time k times slower: rates fall, times grow, shares stay', () => {
    fc.assert(
      fc.property(plants, structures, patterns, logarithmic(0.05, 20), (plant, structure, pattern, k) => {
        const slowPlant = { gain: plant.gain / k, pole: plant.pole / k };
        const slowPattern = scalePattern(pattern, 1 / k);
        const fast = placeGains(plant, structure, pattern, false);
        const slow = placeGains(slowPlant, structure, slowPattern, false);
        // y in mm, u in %: Kp stays, Ki falls by k, Kd grows by k
        expect(near(slow.kp, fast.kp, 1e-9)).toBe(true);
        expect(near(slow.ki * k, fast.ki, 1e-9)).toBe(true);
        const a = stepFigures(plant, fast, structure);
        const b = stepFigures(slowPlant, slow, structure);
        expect(near(a.overshootPct, b.overshootPct, 1e-6, 1e-7)).toBe(true);
        // passages are found to about 1e-8 of the response's own time, however short a rise between them
        expect(near(a.riseTime! * k, b.riseTime, 1e-6, 1e-7 * b.settlingTime!)).toBe(true);
        // settling may jump where an extremum just touches the band
        if (Math.abs(Math.abs(a.overshootPct!) - 2) > 1e-3)
          expect(near(a.settlingTime! * k, b.settlingTime, 1e-4)).toBe(true);
        const ma = margins(plant, fast);
        const mb = margins(slowPlant, slow);
        expect(near(ma.phaseMarginDeg, mb.phaseMarginDeg, 1e-6)).toBe(true);
        expect(near(ma.delayMargin! * k, mb.delayMargin, 1e-6)).toBe(true);
        expect(near(ma.maxSensitivity, mb.maxSensitivity, 1e-6)).toBe(true);
        const [ca, cb] = [closedLoop(plant, fast, structure), closedLoop(slowPlant, slow, structure)];
        expect(near(ca.bandwidthHz! / k, cb.bandwidthHz, 1e-6)).toBe(true);
        const [ea, eb] = [steadyErrors(plant, fast, structure), steadyErrors(slowPlant, slow, structure)];
        expect(near(ea.ramp! * k, eb.ramp, 1e-9)).toBe(true);
      }),
      runs,
    );
  });

  test('position in other units: gains per mm scale, the loop does not notice', () => {
    fc.assert(
      fc.property(plants, structures, patterns, logarithmic(0.01, 100), (plant, structure, pattern, k) => {
        const scaled = { ...plant, gain: plant.gain * k };
        const a = placeGains(plant, structure, pattern, true);
        const b = placeGains(scaled, structure, pattern, true);
        for (const name of ['kp', 'ki', 'kd', 'kv', 'ka'] as const)
          expect(near(a[name], b[name] * k, 1e-9)).toBe(true);
        expect(near(margins(plant, a).phaseMarginDeg, margins(scaled, b).phaseMarginDeg, 1e-6)).toBe(true);
        const move = { distance: 20, duration: 0.2, settle: 0.1, profile: 'raised-cosine' as const };
        const controller = { sampleTime: 0.002 };
        const ya = simulateMove(plant, a, structure, controller, move);
        const yb = simulateMove(scaled, b, structure, controller, { ...move, distance: 20 * k });
        expect(near(ya.peakOutput, yb.peakOutput, 1e-6)).toBe(true);
        expect(near(ya.saturatedPct, yb.saturatedPct, 0, 2)).toBe(true);
      }),
      runs,
    );
  });

  test('the sampled loop tends to the continuous one as T → 0', () => {
    fc.assert(
      fc.property(plants, logarithmic(5, 100), (plant, omega) => {
        const gains = placeGains(plant, 'PID', { kind: 'itae', omega }, false);
        const distance = (T: number): number => {
          const back = sampledPoles(plant, gains, T).map((z) => ({
            re: Math.log(Math.hypot(z.re, z.im)) / T,
            im: Math.atan2(z.im, z.re) / T,
          }));
          return Math.max(
            ...closedLoopPoles(plant, gains).map((p) =>
              Math.min(...back.map((s) => Math.hypot(s.re - p.re, s.im - p.im))),
            ),
          );
        };
        const scale = Math.max(omega, plant.pole);
        const coarse = distance(1e-4 / scale);
        const fine = distance(1e-5 / scale);
        expect(coarse).toBeLessThan(2e-3 * scale);
        expect(fine).toBeLessThan(0.2 * coarse + 1e-8 * scale);
      }),
      runs,
    );
  });

  test('the move never exceeds the output limit', () => {
    fc.assert(
      fc.property(
        plants,
        structures,
        patterns,
        fc.boolean(),
        fc.constantFrom('clamp' as const, 'conditional' as const),
        fc.record({
          coulomb: fc.double({ min: 0, max: 20, noNaN: true }),
          bias: fc.double({ min: -20, max: 20, noNaN: true }),
          deadTime: fc.double({ min: 0, max: 0.02, noNaN: true }),
        }),
        logarithmic(0.001, 5000),
        (plant, structure, pattern, feedForward, antiWindup, imperfections, distance) => {
          const gains = placeGains(plant, structure, pattern, feedForward);
          const controller = { sampleTime: 0.002, resolution: 0.01, outputLimit: 80, antiWindup };
          const move = simulateMove({ ...plant, ...imperfections }, gains, structure, controller, {
            distance,
            duration: 0.3,
            settle: 0.1,
            profile: feedForward ? 'raised-cosine' : 'step',
          });
          expect(move.peakOutput).toBeLessThanOrEqual(80);
          for (const column of Object.values(move.trace) as Float64Array[])
            expect(column.every(Number.isFinite)).toBe(true);
        },
      ),
      runs,
    );
  });
});

/** Every number in an answer, wherever it stands. */
function* numbers(value: unknown): Generator<number> {
  if (typeof value === 'number') yield value;
  else if (value instanceof Float64Array) yield* value;
  else if (typeof value === 'object' && value !== null)
    for (const v of Object.values(value)) yield* numbers(v);
}

test('no input within the accepted ranges gives NaN or Infinity, given or placed gains alike', () => {
  const wildPlant: fc.Arbitrary<Plant> = fc.record(
    {
      gain: logarithmic(1e-6, 1e6),
      pole: logarithmic(1e-3, 1e5),
      deadTime: fc.constantFrom(0, 1e-4, 0.01, 0.0333),
      coulomb: logarithmic(1e-3, 1000),
      bias: fc.double({ min: -1000, max: 1000, noNaN: true }),
    },
    { requiredKeys: ['gain', 'pole'] },
  );
  const wildGain = fc.oneof(
    fc.constantFrom(0, 1e12, -1e12, 1e-300, 5e-324),
    fc.double({ min: -1e12, max: 1e12, noNaN: true }),
    logarithmic(1e-6, 1e6),
  );
  const wildPattern = fc.oneof(
    patterns,
    fc.record({ kind: fc.constant('triple' as const), lambda: logarithmic(1e-6, 1e9) }),
    fc.record({
      kind: fc.constant('pair' as const),
      pole: logarithmic(1e-3, 1e6),
      zeta: logarithmic(1e-6, 1e3),
      omega: logarithmic(1e-3, 1e6),
    }),
  );
  const question = fc.record(
    {
      plant: wildPlant,
      structure: structures as fc.Arbitrary<Structure>,
      pattern: wildPattern,
      gains: fc.record({ kp: wildGain, ki: wildGain, kd: wildGain, kv: wildGain, ka: wildGain }),
      feedForward: fc.boolean(),
      controller: fc.record({
        sampleTime: logarithmic(1e-3, 1),
        outputDelaySamples: fc.nat(4),
        resolution: fc.constantFrom(0, 0.001, 10),
        antiWindup: fc.constantFrom('clamp' as const, 'conditional' as const),
      }),
      move: fc.constant({ distance: 1e6, duration: 1, settle: 0.5, profile: 'raised-cosine' as const }),
      frequenciesHz: fc.constant([1e-6, 1, 1e7]),
    },
    { requiredKeys: ['plant', 'structure', 'pattern', 'feedForward', 'controller'] },
  );
  fc.assert(
    fc.property(question, (q) => {
      const bad = [...numbers(design(q as DesignQuestion))].filter((x) => !Number.isFinite(x));
      expect(bad).toEqual([]);
    }),
    { numRuns: 300 },
  );
}, 60_000);
