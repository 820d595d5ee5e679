import { describe, expect, it } from 'vitest';
import { Axis, type Samples } from './axis.js';
import { inRegisters } from './controller.js';
import type { FaultKind } from './faults.js';
import { plantOf } from './physics.js';
import { commissioned, sheetGains, tarnwickAxis, triplePoleGains } from './commissioned.js';

const feed = tarnwickAxis('CU-03 feed');
const seconds = (axis: Axis, s: number): Samples => axis.run(Math.round(s / axis.make.sampleTime));
const fault = (kind: FaultKind, amount: number, rampSeconds = 0) => ({ kind, amount, rampSeconds });
const newGains = triplePoleGains(feed.baseline, 50, 'PI-D', true);

/** RMS of the second difference of the output, %: what a hum adds to, and moves hardly. */
function roughness({ output }: Samples): number {
  let sum = 0;
  for (let k = 2; k < output.length; k++) sum += (output[k]! - 2 * output[k - 1]! + output[k - 2]!) ** 2;
  return Math.sqrt(sum / (output.length - 2)) / 100;
}

describe('Axis', () => {
  it('runs the same for the same seed, in whatever pieces, and otherwise for another', () => {
    const whole = commissioned(feed, 3).run(9000);
    const pieces = commissioned(feed, 3);
    const joined = [1, 149, 850, 8000].map((n) => pieces.run(n));
    for (const signal of ['target', 'position', 'output'] as const)
      expect(joined.flatMap((part) => [...part[signal]])).toEqual([...whole[signal]]);
    expect([...commissioned(feed, 4).run(9000).position]).not.toEqual([...whole.position]);
  });

  it('measures in whole counts: without noise the nearest one', () => {
    const axis = commissioned({ ...feed, noiseCounts: 0 });
    for (let k = 0; k < 4000; k++) {
      const truth = axis.position;
      expect(axis.run(1).position[0]).toBe(Math.round(truth / feed.resolution));
    }
  });

  it('has measurement noise of the given size', () => {
    const axis = new Axis({ ...feed, noiseCounts: 3 }, 1);
    const { position } = axis.run(50_000);
    const mean = position.reduce((sum, x) => sum + x, 0) / position.length;
    const variance = position.reduce((sum, x) => sum + (x - mean) ** 2, 0) / position.length;
    // rounding adds 1/12; four standard errors
    expect(Math.abs(variance - (9 + 1 / 12))).toBeLessThan(4 * 9 * Math.sqrt(2 / 50_000));
  });

  it('stands under its brake with output 0 until it has gains', () => {
    const axis = new Axis(tarnwickAxis('GA-01 lift'), 1);
    const { output } = seconds(axis, 5);
    expect(output.every((u) => u === 0)).toBe(true);
    expect(axis.position).toBe(0);
  });

  it('is one encoder count coarser by the fault', () => {
    const axis = commissioned(feed);
    axis.addFault(fault('coarse-resolution', 8));
    expect(seconds(axis, 2).position.every((count) => count % 8 === 0)).toBe(true);
  });
});

describe('gains', () => {
  it('wait until the axis is in maintenance and at rest, then are read back as single precision', () => {
    const axis = commissioned(feed);
    while (!axis.moving) axis.run(1);
    axis.orderGains({ revision: 2, gains: newGains, structure: 'PID' });
    expect(axis.settleOrder()).toBeNull();
    axis.setMaintenance(true);
    expect(axis.settleOrder()).toBeNull();
    expect(axis.controller.gains).toEqual(inRegisters(sheetGains(feed)));
    const { output } = seconds(axis, 2);
    expect(axis.atRest).toBe(true);
    const held = output.at(-1)! / 100;
    expect(axis.settleOrder()).toBe(2);
    expect(axis.revision).toBe(2);
    expect(axis.readBack()).toEqual(inRegisters(newGains));
    expect(axis.controller.structure).toBe('PID');
    expect(axis.settleOrder()).toBeNull();
    // no bump: the output stays within what one count more or less does
    const bump = seconds(axis, 0.5).output.map((u) => Math.abs(u / 100 - held) * 100);
    const { kp, kd } = newGains;
    expect(Math.max(...bump) / 100).toBeLessThan(4 * feed.resolution * (kp + (2 * kd) / feed.sampleTime));
  });

  it('are not taken twice: the same revision is only read back again', () => {
    const axis = commissioned(feed);
    axis.setMaintenance(true);
    seconds(axis, 3);
    axis.orderGains({ revision: 2, gains: newGains, structure: 'PI-D' });
    expect(axis.settleOrder()).toBe(2);
    axis.orderGains({ revision: 2, gains: { ...newGains, kp: 99 }, structure: 'PI-D' });
    expect(axis.settleOrder()).toBe(2);
    expect(axis.controller.gains.kp).toBe(Math.fround(newGains.kp));
  });

  it('are dropped when the axis does not come to rest in time', () => {
    const axis = commissioned(feed);
    axis.addFault(fault('restless', 2));
    axis.setMaintenance(true);
    axis.orderGains({ revision: 2, gains: newGains, structure: 'PI-D' });
    for (let s = 0; s < 12; s++) {
      seconds(axis, 1);
      expect(axis.atRest).toBe(false);
      expect(axis.settleOrder()).toBeNull();
    }
    axis.heal();
    seconds(axis, 3);
    expect(axis.atRest).toBe(true);
    expect(axis.settleOrder()).toBeNull();
    expect(axis.revision).toBe(1);
  });

  it('are read back with one altered by the fault, and held as they were sent', () => {
    const axis = commissioned(feed);
    const sent = inRegisters(sheetGains(feed));
    axis.addFault(fault('read-back', 0.01));
    expect(axis.readBack()).toEqual({ ...sent, kd: Math.fround(sent.kd * 1.01) });
    expect(axis.controller.gains).toEqual(sent);
    axis.heal();
    expect(axis.readBack()).toEqual(sent);
  });
});

describe('maintenance', () => {
  it('brings the axis to the end of its move and holds it; production goes on afterwards', () => {
    const axis = commissioned(feed);
    while (!axis.moving) axis.run(1);
    axis.run(100);
    axis.setMaintenance(true);
    seconds(axis, 3);
    const { target } = seconds(axis, 5);
    expect(new Set(target).size).toBe(1);
    expect(Math.abs(target[0]! * feed.resolution - feed.program[0]!.to)).toBeLessThan(1);
    axis.setMaintenance(false);
    expect(new Set(seconds(axis, 3).target).size).toBeGreaterThan(100);
  });
});

describe('faults at the machine', () => {
  it('come when they are scheduled and grow to their amount', () => {
    const axis = commissioned(feed);
    axis.scheduled = [{ tag: feed.tag, at: 2, kind: 'load', amount: 0.5, rampSeconds: 4 }];
    seconds(axis, 1.9);
    expect(axis.physics.mass).toBe(feed.physics.mass);
    seconds(axis, 2.1);
    expect(axis.physics.mass / feed.physics.mass).toBeCloseTo(1.25, 2);
    seconds(axis, 3);
    expect(axis.physics.mass).toBeCloseTo(1.5 * feed.physics.mass, 9);
    expect(axis.scheduled).toEqual([]);
  });

  it('heal completely', () => {
    const axis = commissioned(feed);
    for (const kind of ['load', 'dry-friction', 'supply-pressure', 'derivative-gain', 'speed-up'] as const)
      axis.addFault(fault(kind, kind === 'supply-pressure' ? -0.2 : 0.5));
    axis.heal();
    expect(axis.physics).toEqual(feed.physics);
    const { kd, kv } = inRegisters(sheetGains(feed));
    expect(axis.controller.gains.kd).toBeCloseTo(kd, 6);
    expect(axis.controller.gains.kv).toBeCloseTo(kv, 6);
    expect(axis.faults).toEqual([]);
  });

  it.each([-1, 5])('heal a derivative gain changed by %s to the bit', (amount) => {
    const axis = commissioned(feed);
    axis.addFault(fault('derivative-gain', amount));
    axis.addFault(fault('derivative-gain', 0.3));
    expect(axis.controller.gains.kd).toBeCloseTo((1 + amount) * 1.3 * sheetGains(feed).kd, 5);
    axis.heal();
    expect(axis.controller.gains).toEqual(inRegisters(sheetGains(feed)));
  });

  it('derivative gain makes the output hum while standing and moving, until other gains are applied', () => {
    const lift = tarnwickAxis('ST-01 lift');
    const axis = commissioned(lift);
    const quiet = roughness(seconds(axis, 10));
    axis.addFault(fault('derivative-gain', 5));
    expect(axis.controller.gains.kd).toBeCloseTo(6 * sheetGains(lift).kd, 4);
    expect(roughness(seconds(axis, 10))).toBeGreaterThan(4 * quiet);
    axis.setMaintenance(true);
    seconds(axis, 4);
    axis.orderGains({ revision: 2, gains: sheetGains(lift), structure: lift.structure });
    expect(axis.settleOrder()).toBe(2);
    expect(axis.faults).toEqual([]);
    axis.setMaintenance(false);
    expect(roughness(seconds(axis, 10))).toBeLessThan(1.2 * quiet);
  });

  it('coarse resolution makes the output hum', () => {
    const axis = commissioned(feed);
    const quiet = roughness(seconds(axis, 10));
    axis.addFault(fault('coarse-resolution', 20));
    expect(roughness(seconds(axis, 10))).toBeGreaterThan(4 * quiet);
  });

  it('speed-up and loss of force saturate the output', () => {
    const saturated = ({ output }: Samples): number =>
      output.filter((u) => Math.abs(u) === 10_000).length / output.length;
    for (const [kind, amount] of [
      ['speed-up', 1],
      ['supply-pressure', -0.5],
    ] as const) {
      const axis = commissioned(feed);
      expect(saturated(seconds(axis, 10))).toBe(0);
      axis.addFault(fault(kind, amount));
      expect(saturated(seconds(axis, 10))).toBeGreaterThan(0.03);
    }
  });

  it('changes what the axis settles to: the holding output follows b', () => {
    const axis = commissioned(feed);
    const mean = ({ output }: Samples): number => output.reduce((sum, u) => sum + u, 0) / output.length / 100;
    axis.setMaintenance(true);
    seconds(axis, 2);
    const before = mean(seconds(axis, 2));
    axis.addFault(fault('null-shift', 8));
    seconds(axis, 3);
    const { bias, coulomb } = plantOf(axis.physics);
    const after = mean(seconds(axis, 2));
    expect(after - before).toBeGreaterThan(4);
    expect(Math.abs(after - bias)).toBeLessThanOrEqual(coulomb + 0.1);
  });
});
