import { describe, expect, it } from 'vitest';
import {
  beyondTogether,
  checkedFault,
  FAULT,
  FAULT_KINDS,
  physicsWith,
  type ActiveFault,
  type FaultKind,
} from './faults.js';
import { plantOf, type Physics } from './physics.js';

const sound: Physics = {
  mass: 80,
  viscous: 2400,
  coulomb: 40,
  forceForward: 20,
  forceReverse: 20,
  offset: 10,
  deadTime: 0.001,
};
const before = plantOf(sound);
const fault = (kind: FaultKind, amount: number, rampSeconds = 0): ActiveFault => ({
  kind,
  amount,
  rampSeconds,
  since: 100,
});
const after = (kind: FaultKind, amount: number) => plantOf(physicsWith(sound, [fault(kind, amount)], 200));

describe('what a fault does to K, α, f and b', () => {
  it('load: only α, by 1/(1 + amount)', () => {
    const plant = after('load', 0.6);
    expect(plant).toEqual({ ...before, pole: plant.pole });
    expect(plant.pole).toBeCloseTo(before.pole / 1.6, 12);
  });

  it('viscous drag: K down and α up by the same factor', () => {
    const plant = after('viscous-drag', 0.5);
    expect(plant.gain).toBeCloseTo(before.gain / 1.5, 12);
    expect(plant.pole).toBeCloseTo(before.pole * 1.5, 12);
    expect(plant.coulomb).toBe(before.coulomb);
  });

  it('dry friction: only f', () => {
    expect(after('dry-friction', 2)).toEqual({ ...before, coulomb: expect.closeTo(3 * before.coulomb, 12) });
  });

  it('supply pressure: K down, f and b up in % of output, α stays', () => {
    const plant = after('supply-pressure', -0.3);
    expect(plant.gain).toBeCloseTo(before.gain * 0.7, 12);
    expect(plant.pole).toBe(before.pole);
    expect(plant.coulomb).toBeCloseTo(before.coulomb / 0.7, 12);
    expect(plant.bias).toBeCloseTo(before.bias / 0.7, 12);
  });

  it('null shift: only b, by the amount', () => {
    const plant = after('null-shift', 3);
    expect(plant.bias).toBeCloseTo(before.bias + 3, 12);
    expect({ ...plant, bias: 0 }).toEqual({
      ...before,
      bias: 0,
      coulomb: expect.closeTo(before.coulomb, 12),
    });
  });

  it('one direction: only K forward', () => {
    const plant = after('one-direction', -0.3);
    expect(plant.gainForward).toBeCloseTo(0.7 * before.gainForward, 12);
    expect(plant.gainReverse).toBe(before.gainReverse);
  });

  it('comes on as a ramp and adds to others of its kind', () => {
    const slow = fault('load', 0.6, 30);
    expect(physicsWith(sound, [slow], 100).mass).toBe(80);
    expect(physicsWith(sound, [slow], 110).mass).toBeCloseTo(96, 12);
    expect(physicsWith(sound, [slow], 500).mass).toBeCloseTo(128, 12);
    expect(physicsWith(sound, [slow, fault('load', 0.5)], 130).mass).toBeCloseTo(168, 12);
  });
});

describe('checkedFault', () => {
  it.each(FAULT_KINDS)('%s has a usual amount that it accepts itself', (kind) => {
    expect(checkedFault(kind, undefined, undefined)).toEqual({
      kind,
      amount: FAULT[kind].usual,
      rampSeconds: 0,
    });
    expect(checkedFault(kind, FAULT[kind].usual, 0)).toMatchObject({ kind });
  });

  it.each([
    ['melted', 1, 0, 'kind'],
    [7, 1, 0, 'kind'],
    ['load', '0.6', 0, 'amount'],
    ['load', -1, 0, 'amount'],
    ['load', Number.NaN, 0, 'amount'],
    ['load', 0.6, -1, 'rampSeconds'],
    ['silence', 1, 10, 'rampSeconds'],
    ['coarse-resolution', 2.5, 0, 'amount'],
  ])('refuses %s %s %s naming %s', (kind, amount, ramp, named) => {
    const problems = checkedFault(kind, amount, ramp) as string[];
    expect(problems).toHaveLength(1);
    expect(problems[0]).toMatch(new RegExp(`^${named} `));
  });
});

describe('beyondTogether', () => {
  it.each(['load', 'viscous-drag', 'dry-friction', 'null-shift'] as const)(
    '%s: what is refused would leave the range, what is let through leaves a machine with mass and friction',
    (kind) => {
      const { min, max } = FAULT[kind];
      expect(beyondTogether([], fault(kind, min))).toBeNull();
      expect(beyondTogether([fault(kind, min)], fault(kind, min))).toMatch(/^amount /);
      expect(beyondTogether([fault(kind, max)], fault(kind, 0.1))).toMatch(/^amount /);
      expect(beyondTogether([fault(kind, min)], fault(kind, -min))).toBeNull();
      expect(beyondTogether([fault('silence', 1)], fault(kind, min))).toBeNull();
    },
  );

  it.each(['supply-pressure', 'one-direction'] as const)(
    '%s never takes the force away altogether',
    (kind) => {
      const twice = [fault(kind, FAULT[kind].min), fault(kind, FAULT[kind].min)];
      expect(beyondTogether(twice.slice(1), twice[0]!)).toBeNull();
      expect(physicsWith(sound, twice, 200).forceForward).toBeGreaterThan(0);
    },
  );
});
