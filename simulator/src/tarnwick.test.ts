import { describe, expect, it } from 'vitest';
import { checkedFault } from './faults.js';
import { plantOf } from './physics.js';
import { TARNWICK_AXES, TARNWICK_GATEWAYS, TARNWICK_SCHEDULE } from './tarnwick.js';
import { commissioned } from './commissioned.js';

describe('Tarnwick Tileworks', () => {
  it('has 24 axes with tags of their own on nine machines of three gateways', () => {
    expect(TARNWICK_AXES).toHaveLength(24);
    expect(new Set(TARNWICK_AXES.map(({ tag }) => tag)).size).toBe(24);
    expect(new Set(TARNWICK_AXES.map(({ machine }) => machine)).size).toBe(9);
    expect(new Set(TARNWICK_AXES.map(({ gateway }) => gateway))).toEqual(
      new Set(TARNWICK_GATEWAYS.map(({ name }) => name)),
    );
    expect(TARNWICK_AXES.filter(({ actuator }) => actuator === 'hydraulic')).toHaveLength(6);
  });

  it('sends 15 000 samples a second', () => {
    expect(TARNWICK_AXES.reduce((sum, { sampleTime }) => sum + 1 / sampleTime, 0)).toBe(15_000);
  });

  it('has faults only for axes that it has', () => {
    for (const { tag, kind, amount, rampSeconds, at } of TARNWICK_SCHEDULE) {
      expect(TARNWICK_AXES.some((axis) => axis.tag === tag)).toBe(true);
      expect(checkedFault(kind, amount, rampSeconds)).toEqual({ kind, amount, rampSeconds });
      expect(at + rampSeconds).toBeLessThan(150);
    }
  });
});

describe.each(TARNWICK_AXES.map((axis) => [axis.tag, axis] as const))('%s', (_, axis) => {
  it('has a commissioning sheet within 2 % of the truth and a sensible λ', () => {
    const truth = plantOf(axis.physics);
    const { baseline } = axis;
    expect(Math.abs(baseline.gain / truth.gain - 1)).toBeLessThan(0.02);
    expect(Math.abs(baseline.pole / truth.pole - 1)).toBeLessThan(0.02);
    expect(Math.abs(baseline.coulomb - truth.coulomb)).toBeLessThan(0.1);
    expect(Math.abs(baseline.bias - truth.bias)).toBeLessThan(0.1);
    expect(truth.pole).toBeGreaterThan(4);
    expect(truth.pole).toBeLessThan(120);
    expect(axis.lambda).toBeGreaterThan(truth.pole / 3);
    if (truth.gainForward !== truth.gainReverse) {
      expect(baseline.gainForward! / truth.gainForward).toBeCloseTo(1, 1);
      expect(baseline.gainReverse! / truth.gainReverse).toBeCloseTo(1, 1);
    }
  });

  it('keeps its tolerance with a quarter of its output to spare, about half of the time in motion', () => {
    const machine = commissioned(axis, 7);
    const q = axis.resolution;
    machine.run(Math.round(2 / axis.sampleTime));
    const { target, position, output } = machine.run(Math.round(40 / axis.sampleTime));
    let peakError = 0;
    let peakOutput = 0;
    let moving = 0;
    for (let k = 1; k < target.length; k++) {
      peakError = Math.max(peakError, Math.abs(target[k]! - position[k]!) * q);
      peakOutput = Math.max(peakOutput, Math.abs(output[k]!) / 100);
      if (target[k] !== target[k - 1]) moving++;
    }
    expect(Math.min(...position) * q).toBeGreaterThan(axis.travel.min);
    expect(Math.max(...position) * q).toBeLessThan(axis.travel.max);
    expect(peakOutput).toBeLessThan(75);
    expect(peakError).toBeLessThan(0.8 * axis.tolerances.followingError);
    expect(moving / target.length).toBeGreaterThan(0.33);
    expect(moving / target.length).toBeLessThan(0.67);
  });

  it('names its largest move as its own move', () => {
    let from = axis.program.at(-1)!.to;
    const distances = axis.program.map(({ to }) => {
      const distance = Math.abs(to - from);
      from = to;
      return distance;
    });
    expect(axis.move.distance).toBeGreaterThanOrEqual(Math.max(...distances));
    expect(axis.travel.max - axis.travel.min).toBeGreaterThan(axis.move.distance);
  });
});
