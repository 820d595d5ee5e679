import { describe, expect, test } from 'vitest';
import { OnlineIdentifier } from '../../src/identification/online-identifier.js';
import { physicsOf, randomAxis, TestAxis, type AxisSetup } from './test-axis.js';

const identifierFor = ({ designGain, designPole, sampleTime, resolution }: AxisSetup): OnlineIdentifier =>
  new OnlineIdentifier({ gain: designGain, pole: designPole, sampleTime, resolution });

/** Streams whole seconds and hands over the estimate after each closed window. */
function stream(
  axis: TestAxis,
  identifier: OnlineIdentifier,
  seconds: number,
  onWindow: (second: number) => void,
): void {
  for (let second = 0; second < seconds; second++) {
    const { position, output } = axis.run(1);
    identifier.push(position, output, 0, position.length);
    while (identifier.takeWindow()) onWindow(second);
  }
}

describe('identification from a stream', () => {
  test.each([1, 0.75])(
    'after a minute of production intervals of K and α cover the truth nine times in ten (K⁻ = %f K⁺)',
    (ratio) => {
      const axes = 60;
      let gainCovered = 0;
      let poleCovered = 0;
      for (let seed = 1; seed <= axes; seed++) {
        const { setup, ...truth } = randomAxis(seed);
        const gainReverse = ratio * truth.gain;
        setup.physics = physicsOf({ ...truth, stiction: truth.coulomb * 1.15, gainReverse });
        const identifier = identifierFor(setup);
        stream(new TestAxis(setup), identifier, 60, () => undefined);
        const { verdict, gain, pole, ...rest } = identifier.estimate()!;
        expect(verdict).not.toBe('unidentifiable');
        expect(rest.gainReverse !== undefined, `directions told apart, seed ${seed}`).toBe(ratio !== 1);
        const mean = (truth.gain + gainReverse) / 2;
        if (gain.low <= mean && mean <= gain.high) gainCovered++;
        if (pole.low <= truth.pole && truth.pole <= pole.high) poleCovered++;
      }
      expect(gainCovered).toBeGreaterThanOrEqual(0.9 * axes);
      expect(poleCovered).toBeGreaterThanOrEqual(0.9 * axes);
    },
  );

  test.each([
    ['mass', 1.6],
    ['viscous', 1.5],
    ['coulomb', 3],
    ['force', 0.7],
    ['offset', 4],
  ] as const)(
    'a step of %s by × %f is never taken for something else, and is known again within a minute',
    (what, factor) => {
      for (let seed = 1; seed <= 6; seed++) {
        const { setup } = randomAxis(seed, { dwell: 0.4 });
        const axis = new TestAxis(setup);
        const identifier = identifierFor(setup);
        stream(axis, identifier, 80, () => undefined);
        const { physics } = axis;
        if (what === 'force')
          axis.physics = {
            ...physics,
            forceForward: physics.forceForward * factor,
            forceReverse: physics.forceReverse * factor,
          };
        else if (what === 'coulomb')
          axis.physics = {
            ...physics,
            coulomb: physics.coulomb * factor,
            stiction: physics.stiction * factor,
          };
        else axis.physics = { ...physics, [what]: physics[what] * factor };
        const gain = axis.physics.forceForward / axis.physics.viscous;
        const pole = axis.physics.viscous / axis.physics.mass;
        const former = { gain: physics.forceForward / physics.viscous, pole: physics.viscous / physics.mass };
        // Between the old and the new value, with room for what a mixed window does: beyond that it must not say "usable".
        const between = (value: number, a: number, b: number, room: number): boolean =>
          value > Math.min(a, b) * (1 - room) && value < Math.max(a, b) * (1 + room);
        stream(axis, identifier, 90, () => {
          const estimate = identifier.estimate();
          if (estimate?.verdict !== 'usable') return;
          expect(
            between(estimate.gain.value, former.gain, gain, 0.06),
            `K ${estimate.gain.value} of ${gain}, seed ${seed}`,
          ).toBe(true);
          expect(
            between(estimate.pole.value, former.pole, pole, 0.15),
            `α ${estimate.pole.value} of ${pole}, seed ${seed}`,
          ).toBe(true);
        });
        const settled = identifier.estimate()!;
        expect(settled.verdict).toBe('usable');
        expect(settled.gain.value / gain).toBeCloseTo(1, 1);
        expect(Math.abs(settled.pole.value / pole - 1)).toBeLessThan(0.05);
      }
    },
  );

  test('a state that is saved and put back continues to the bit', () => {
    const { setup } = randomAxis(3);
    const axis = new TestAxis(setup);
    const first = identifierFor(setup);
    stream(axis, first, 30, () => undefined);
    const second = identifierFor(setup);
    second.state.set(first.state);
    const { position, output } = axis.run(25);
    first.push(position, output, 0, position.length);
    // The other in uneven pieces: how the stream is cut must not matter either.
    for (let from = 0; from < position.length; from += 777)
      second.push(position, output, from, Math.min(position.length, from + 777));
    expect(second.state).toEqual(first.state);
    expect(second.estimate()).toEqual(first.estimate());
  });

  test('standstill teaches nothing, with encoder noise as well', () => {
    const { setup } = randomAxis(5);
    const identifier = identifierFor(setup);
    stream(new TestAxis(setup), identifier, 40, () => undefined);
    const before = identifier.estimate()!;
    // The encoder flickers by a count while the output pushes against dry friction.
    identifier.gap();
    const rest = new Int32Array(60_000).map((_, i) => 1000 + ((i * 7919) % 3 === 0 ? 1 : 0));
    // The first stretch may close the block that was open when the motion ended.
    identifier.push(rest, new Int16Array(60_000).fill(150), 0, 60_000);
    const resting = identifier.estimate()!;
    identifier.push(rest, new Int16Array(60_000).fill(150), 0, 60_000);
    expect(identifier.estimate()).toEqual(resting);
    expect(resting.gain.value / before.gain.value).toBeCloseTo(1, 2);
    expect(resting.pole.value / before.pole.value).toBeCloseTo(1, 2);
  });

  test('a gap restarts the filters and keeps what was learned', () => {
    const { setup, gain, pole } = randomAxis(8);
    const axis = new TestAxis(setup);
    const identifier = identifierFor(setup);
    for (let part = 0; part < 12; part++) {
      stream(axis, identifier, 6, () => undefined);
      axis.run(0.7); // lost
      identifier.gap();
    }
    const estimate = identifier.estimate()!;
    expect(Math.abs(estimate.gain.value / gain - 1)).toBeLessThan(0.02);
    expect(Math.abs(estimate.pole.value / pole - 1)).toBeLessThan(0.05);
  });

  test('nothing is said from an axis that never moved', () => {
    const { setup } = randomAxis(9);
    const identifier = identifierFor(setup);
    identifier.push(new Int32Array(120_000), new Int16Array(120_000), 0, 120_000);
    const estimate = identifier.estimate();
    expect(estimate === null || estimate.verdict === 'unidentifiable').toBe(true);
    expect(identifier.takeWindow()).toBeNull();
  });
});
