import { describe, expect, it } from 'vitest';
import { Controller, inRegisters, type Gains, type Structure } from './controller.js';
import { randomFrom } from './random.js';

const gains: Gains = { kp: 12.3, ki: 160.7, kd: 0.21, kv: 0.31, ka: 0.0026 };
const T = 0.002;
const STRUCTURES: Structure[] = ['PID', 'PI-D', 'I-PD'];

describe('Controller', () => {
  it('works out two ticks as by hand', () => {
    const controller = new Controller(0.5);
    controller.start({ kp: 2, ki: 1, kd: 0.25, kv: 0.5, ka: 0.125 }, 'PID', 10);
    // e = 2: P = 4, D = 0.25·2/0.5 = 1, F = 0.5·4 + 0.125·8 = 3, I = 0.5·2 = 1
    expect(controller.tick({ position: 12, velocity: 4, acceleration: 8 }, 10)).toBe(9);
    // e = 1: P = 2, D = 0.25·(1 − 2)/0.5 = −0.5, F = 0, I = 1 + 0.5 = 1.5
    expect(controller.tick({ position: 12, velocity: 0, acceleration: 0 }, 11)).toBe(3);
  });

  it.each(STRUCTURES)('follows the algorithm to the register, clamped and not: %s', (structure) => {
    const random = randomFrom(5, structure);
    const controller = new Controller(T);
    controller.start(gains, structure, 3);
    const { kp, ki, kd, kv, ka } = inRegisters(gains);
    const beta = structure === 'I-PD' ? 0 : 1;
    const gamma = structure === 'PID' ? 1 : 0;
    let before = gamma * 3 - 3;
    let I = -kp * (beta * 3 - 3);
    let clamped = 0;
    for (let k = 0; k < 3000; k++) {
      const r = 3 + 4 * Math.sin(k / 90);
      const target = { position: r, velocity: 80 * random.normal(), acceleration: 2000 * random.normal() };
      const y = r + 0.5 * random.normal();
      const P = kp * (beta * r - y);
      const D = (kd * (gamma * r - y - before)) / T;
      before = gamma * r - y;
      const rest = P + D + kv * target.velocity + ka * target.acceleration;
      I = Math.min(Math.max(I + ki * T * (r - y), -100 - rest), 100 - rest);
      const u = Math.min(Math.max(rest + I, -100), 100);
      if (Math.abs(u) === 100) clamped++;
      expect(Math.abs(controller.tick(target, y) - u)).toBeLessThanOrEqual(0.005 + 1e-9);
      expect(controller.integrator).toBeCloseTo(I, 6);
    }
    expect(clamped).toBeGreaterThan(100);
    expect(clamped).toBeLessThan(2900);
  });

  it('holds its gains in single precision', () => {
    const controller = new Controller(T);
    controller.start(gains, 'PI-D', 0);
    expect(controller.gains).toEqual({
      kp: Math.fround(12.3),
      ki: Math.fround(160.7),
      kd: Math.fround(0.21),
      kv: Math.fround(0.31),
      ka: Math.fround(0.0026),
    });
    expect(controller.gains.kp).not.toBe(12.3);
  });

  it.each(STRUCTURES.flatMap((from) => STRUCTURES.map((to) => [from, to] as const)))(
    'takes new gains at rest without a bump: %s to %s',
    (from, to) => {
      const controller = new Controller(T);
      const rest = { position: 250, velocity: 0, acceleration: 0 };
      controller.start(gains, from, 250);
      controller.integrator += 4.2;
      const before = controller.tick(rest, 250);
      expect(before).toBeCloseTo(4.2, 6);
      controller.change({ kp: 31, ki: 500, kd: 0.6, kv: 0.7, ka: 0.004 }, to);
      expect(controller.tick(rest, 250)).toBeCloseTo(before, 6);
      expect(controller.tick(rest, 250)).toBeCloseTo(before, 6);
    },
  );
});
