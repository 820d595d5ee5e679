import { expect, test } from 'vitest';
import { OnlineIdentifier } from '../../src/identification/online-identifier.js';
import { probableCause, type CauseName } from '../../src/identification/probable-cause.js';
import { randomAxis, TestAxis, type AxisPhysics } from './test-axis.js';

/** One physical quantity at a time, from slight to gross. */
const FAULTS: [CauseName, (p: AxisPhysics) => AxisPhysics][] = [
  ...[1.3, 1.6, 0.7].map((f): [CauseName, (p: AxisPhysics) => AxisPhysics] => [
    'load',
    (p) => ({ ...p, mass: p.mass * f }),
  ]),
  ...[1.3, 1.6].map((f): [CauseName, (p: AxisPhysics) => AxisPhysics] => [
    'viscous drag',
    (p) => ({ ...p, viscous: p.viscous * f }),
  ]),
  ...[0.6, 0.7, 0.8].map((f): [CauseName, (p: AxisPhysics) => AxisPhysics] => [
    'actuating force',
    (p) => ({ ...p, forceForward: p.forceForward * f, forceReverse: p.forceReverse * f }),
  ]),
  ...[2, 3].map((f): [CauseName, (p: AxisPhysics) => AxisPhysics] => [
    'dry friction',
    (p) => ({ ...p, coulomb: p.coulomb * f, stiction: p.stiction * f }),
  ]),
  ['offset', (p) => ({ ...p, offset: p.offset + 0.03 * p.forceForward * 100 * 0.5 })],
  ['one direction', (p) => ({ ...p, forceReverse: p.forceReverse * 0.75 })],
];

test('the right cause is named in nine cases of ten, a wrong one in hardly any', () => {
  let right = 0;
  let unclear = 0;
  const wrong: string[] = [];
  let cases = 0;
  for (const [name, change] of FAULTS)
    for (let seed = 1; seed <= 6; seed++) {
      const { setup, gain, pole, coulomb, bias } = randomAxis(seed + 40, { dwell: 0.4 });
      const axis = new TestAxis(setup);
      axis.physics = change(axis.physics);
      const identifier = new OnlineIdentifier({
        gain: setup.designGain,
        pole: setup.designPole,
        sampleTime: setup.sampleTime,
        resolution: setup.resolution,
      });
      const { position, output } = axis.run(60);
      identifier.push(position, output, 0, position.length);
      // A commissioning identification is itself a per cent or two beside the truth.
      const cause = probableCause({
        baseline: { gain: gain * 1.01, pole: pole * 0.98 },
        estimate: identifier.estimate()!,
        coulombBaseline: coulomb * 1.03,
        biasBaseline: bias + 0.05,
      });
      cases++;
      if (cause.name === name) right++;
      else if (cause.name === 'unclear') unclear++;
      else wrong.push(`${name} taken for ${cause.name}, seed ${seed}`);
      // Only a change of load is answered by a retune.
      expect(cause.advice).toBe(cause.name === 'load' ? 'retune' : 'inspect first');
    }
  expect({ share: right / cases >= 0.9, right, unclear, cases, wrong }).toMatchObject({ share: true });
  expect(wrong.length).toBeLessThanOrEqual(0.05 * cases);
});

test('supply pressure down 30 % is named although the baseline of α is 2 % off', () => {
  const interval = (value: number, half: number) => ({ value, low: value - half, high: value + half });
  const cause = probableCause({
    baseline: { gain: 7.69, pole: 84.6 },
    estimate: {
      gain: interval(7.69 * 0.7, 0.01),
      pole: interval(83.1, 0.15),
      coulomb: interval(1.45 / 0.7, 0.01),
      bias: interval(0.71 / 0.7, 0.01),
      deadTime: 0.0015,
      lnCovariance: { gain: 1e-6, cross: 0, pole: 1e-6 },
      fitPct: 98,
      movingSeconds: 40,
      verdict: 'usable',
      remarks: [],
    },
    coulombBaseline: 1.4,
    biasBaseline: 0.71,
  });
  expect(cause).toMatchObject({ name: 'actuating force', direction: 'down' });
  expect(cause.amountPct).toBeCloseTo(-30, -0.5);
});
