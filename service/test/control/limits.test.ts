import { describe, expect, test } from 'vitest';
import { lambdaLimits, type LimitName, type LimitQuestion, regionPlants } from '../../src/control/limits.js';
import { simulateMove } from '../../src/control/move.js';
import { patternAt, placeGains } from '../../src/control/pole-placement.js';
import { expectedMove, recommendGains } from '../../src/control/recommendation.js';
import { outputRipple, poleDamping, sampledPoles } from '../../src/control/sampled-loop.js';
import { sampledMaxSensitivity } from '../../src/control/sampled-margins.js';

const axis: LimitQuestion = {
  plant: { gain: 8, pole: 25, coulomb: 3, bias: 1 },
  region: { gain: { low: 7.8, high: 8.2 }, pole: { low: 23, high: 27 } },
  structure: 'PI-D',
  pattern: { kind: 'triple', lambda: 40 },
  feedForward: true,
  controller: { sampleTime: 0.001, resolution: 0.001 },
  move: { distance: 200, duration: 1, profile: 'raised-cosine' },
  tolerances: { followingError: 1 },
};

/** Each limit's quantity measured from outside, worst of estimate and corners. */
function measure(q: LimitQuestion, name: LimitName, lambda: number): number {
  const gains = placeGains(q.plant, q.structure, patternAt(q.pattern, lambda), q.feedForward);
  const { sampleTime, resolution = 0 } = q.controller;
  const all = regionPlants(q.plant, q.region).map((plant) => {
    switch (name) {
      case 'output-headroom':
      case 'following-error': {
        const move = simulateMove(plant, gains, q.structure, q.controller, q.move, { output: plant.bias });
        return name === 'following-error' ? move.peakFollowingError : move.peakOutput;
      }
      case 'output-ripple':
        return outputRipple(plant, gains, sampleTime, 0, resolution) ?? Infinity;
      case 'sampled-damping':
        return -Math.min(...sampledPoles(plant, gains, sampleTime).map(poleDamping));
      case 'sensitivity':
        return sampledMaxSensitivity(plant, gains, sampleTime).value;
    }
  });
  return Math.max(...all);
}

describe('limits of λ', () => {
  const found = lambdaLimits(axis);
  test('each bound is where its own quantity meets its threshold', () => {
    let bounded = 0;
    for (const limit of found.limits) {
      if (limit.bound === null) continue;
      bounded++;
      const threshold = limit.name === 'sampled-damping' ? -limit.threshold : limit.threshold;
      const outward = limit.side === 'upper' ? 1.01 : 0.99;
      expect(measure(axis, limit.name, limit.bound), limit.name).toBeLessThanOrEqual(threshold);
      expect(measure(axis, limit.name, limit.bound * outward), limit.name).toBeGreaterThan(threshold);
    }
    expect(bounded).toBeGreaterThanOrEqual(4);
  });
  test('the allowed interval ends at the tightest of them, which bind', () => {
    const { allowed, binding, limits } = found;
    const upper = limits.find((l) => l.name === binding.upper)!;
    const lower = limits.find((l) => l.name === binding.lower)!;
    expect(allowed).toEqual({ low: lower.allowed!.low, high: upper.allowed!.high });
    for (const l of limits) {
      expect(l.allowed!.high).toBeGreaterThanOrEqual(allowed!.high);
      expect(l.allowed!.low).toBeLessThanOrEqual(allowed!.low);
    }
    expect(binding.lower).toBe('following-error');
  });
  test('a wider region allows less', () => {
    const wide = lambdaLimits({
      ...axis,
      region: { gain: { low: 6, high: 10 }, pole: { low: 15, high: 35 } },
    });
    const point = lambdaLimits({ ...axis, region: undefined });
    expect(wide.allowed!.high).toBeLessThan(found.allowed!.high);
    expect(point.allowed!.high).toBeGreaterThan(found.allowed!.high);
    expect(wide.allowed!.low).toBeGreaterThan(found.allowed!.low);
  });
  test('a coarser encoder lowers what ripple allows', () => {
    const bound = (resolution: number): number =>
      lambdaLimits({ ...axis, controller: { sampleTime: 0.001, resolution } }).limits.find(
        (l) => l.name === 'output-ripple',
      )!.bound!;
    expect(bound(0.004)).toBeLessThan(bound(0.001));
  });
  test('a delay lowers what sensitivity allows', () => {
    const delayed = lambdaLimits({ ...axis, controller: { ...axis.controller, outputDelaySamples: 3 } });
    const bound = (l: typeof found): number => l.limits.find((x) => x.name === 'sensitivity')!.allowed!.high;
    expect(bound(delayed)).toBeLessThan(bound(found));
  });
});

describe('recommendation', () => {
  test('keeps the commissioned λ, structure and pattern where no limit forbids them', () => {
    const advice = recommendGains(axis);
    expect(advice).toMatchObject({ verdict: 'keep', lambda: 40, pattern: axis.pattern, waysOut: [] });
    expect(advice.gains).toEqual(placeGains(axis.plant, 'PI-D', axis.pattern, true));
  });
  test('takes the nearest λ and names what binds above', () => {
    const coarse = { ...axis, controller: { sampleTime: 0.001, resolution: 0.02 } };
    const advice = recommendGains(coarse);
    expect(advice.verdict).toBe('nearest');
    expect(advice.lambda).toBe(advice.limits.allowed!.high);
    expect(advice.lambda).toBeLessThan(40);
    expect(advice.limits.binding.upper).toBe('output-ripple');
    expect(advice.reason).toContain('resolution');
    expect(measure(coarse, 'output-ripple', advice.lambda!)).toBeLessThanOrEqual(1);
  });
  test('and below', () => {
    const strict = { ...axis, pattern: { kind: 'triple', lambda: 12 } as const };
    const advice = recommendGains({ ...strict, tolerances: { followingError: 0.5 } });
    expect(advice.verdict).toBe('nearest');
    expect(advice.lambda).toBeGreaterThan(12);
    expect(advice.limits.binding.lower).toBe('following-error');
    expect(measure(axis, 'following-error', advice.lambda!)).toBeLessThanOrEqual(0.5);
  });
  test('proposes nothing, with the reason, where no λ is left', () => {
    // 1000 mm in 1 s peaks at 1571 mm/s: 196 % of output at K = 8
    const advice = recommendGains({ ...axis, move: { ...axis.move, distance: 1000 } });
    expect(advice).toMatchObject({ verdict: 'none', gains: null, lambda: null, pattern: null });
    expect(advice.reason).toContain('output headroom');
    expect(advice.waysOut.join()).toContain('slow the move');
  });
  test('proposes nothing where an upper and a lower limit cross', () => {
    const advice = recommendGains({
      ...axis,
      controller: { sampleTime: 0.001, resolution: 0.02 },
      tolerances: { followingError: 0.1 },
    });
    expect(advice.verdict).toBe('none');
    expect(advice.limits.binding).toEqual({ upper: 'output-ripple', lower: 'following-error' });
    expect(advice.waysOut).toContain('fit a finer encoder');
  });
  test('works for every pattern and structure', () => {
    for (const structure of ['PID', 'PI-D', 'I-PD'] as const)
      for (const pattern of [
        { kind: 'real', poles: [30, 45, 60] },
        { kind: 'pair', pole: 40, zeta: 0.7, omega: 50 },
        { kind: 'itae', omega: 45 },
      ] as const) {
        const { limits } = recommendGains({
          ...axis,
          structure,
          pattern,
          tolerances: { followingError: 30 },
        });
        expect(limits.allowed).not.toBeNull();
      }
  });
});

test('the expected move: drifted plant, current against proposed gains', () => {
  const current = placeGains({ gain: 8, pole: 25 }, 'PI-D', axis.pattern, true);
  const drifted = {
    ...axis,
    plant: { ...axis.plant, gain: 6 },
    region: { gain: { low: 5.8, high: 6.2 }, pole: { low: 23, high: 27 } },
  };
  const advice = recommendGains(drifted);
  const { before, after } = expectedMove(
    drifted,
    { gains: current, structure: 'PI-D' },
    { gains: advice.gains!, structure: 'PI-D' },
  );
  expect(after!.nominal.peakFollowingError).toBeLessThan(before.nominal.peakFollowingError);
  for (const move of [before, after!])
    for (const figure of ['peakFollowingError', 'rmsFollowingError', 'peakOutput'] as const)
      expect(move.worst[figure]).toBeGreaterThanOrEqual(move.nominal[figure]);
  expect(expectedMove(drifted, { gains: current, structure: 'PI-D' }, null).after).toBeNull();
});
