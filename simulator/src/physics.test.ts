import { describe, expect, it } from 'vitest';
import { Body, plantOf, type Physics } from './physics.js';
import { randomFrom } from './random.js';

const TRAVEL = { min: -1e6, max: 1e6 };
const machine: Physics = {
  mass: 120,
  viscous: 3000,
  coulomb: 60,
  forceForward: 30,
  forceReverse: 36,
  offset: 24,
  deadTime: 0,
};
const still: Physics = { ...machine, coulomb: 0, offset: 0 };

function bodyAt(physics: Physics, sampleTime = 0.001, travel = TRAVEL): Body {
  return new Body(physics, sampleTime, travel, 0);
}

function run(body: Body, output: number, ticks: number): void {
  for (let k = 0; k < ticks; k++) body.advance(output);
}

describe('plantOf', () => {
  it('is K = g/B, α = B/M, f = F/g, b = o/g', () => {
    const plant = plantOf({ ...machine, forceReverse: 30 });
    expect(plant.gain).toBeCloseTo(10, 12);
    expect(plant.pole).toBeCloseTo(25, 12);
    expect(plant.coulomb).toBeCloseTo(2, 12);
    expect(plant.bias).toBeCloseTo(0.8, 12);
  });
});

describe('Body', () => {
  it.each([
    [40, 1],
    [-40, -1],
  ])('settles at %s %% at v = K(u − f·sgn v − b) of its direction', (output, sign) => {
    const body = bodyAt(machine);
    run(body, output, 2000);
    const { gainForward, gainReverse, coulomb, bias } = plantOf(machine);
    const gain = sign > 0 ? gainForward : gainReverse;
    expect(body.velocity).toBeCloseTo(gain * (output - sign * coulomb - bias), 9);
  });

  it('starts with the time constant 1/α: y = v∞(t − (1 − e^(−αt))/α) at every tick', () => {
    const body = bodyAt(machine, 0.002);
    const { pole, gainForward, coulomb, bias } = plantOf(machine);
    const final = gainForward * (50 - coulomb - bias);
    for (let k = 1; k <= 200; k++) {
      body.advance(50);
      const t = k * 0.002;
      expect(body.velocity).toBeCloseTo(final * (1 - Math.exp(-pole * t)), 9);
      expect(body.position).toBeCloseTo(final * (t - (1 - Math.exp(-pole * t)) / pole), 9);
    }
  });

  it('sticks up to |g·u − o| = F and leaves just above, in either direction', () => {
    const { coulomb, offset, forceForward, forceReverse } = machine;
    for (const [output, sign] of [
      [(offset + coulomb) / forceForward, 1],
      [(offset - coulomb) / forceReverse, -1],
    ] as const) {
      const stuck = bodyAt(machine);
      run(stuck, output - sign * 1e-9, 5000);
      expect(stuck.position).toBe(0);
      expect(stuck.velocity).toBe(0);
      const free = bodyAt(machine);
      run(free, output + sign * 0.01, 50);
      expect(free.velocity * sign).toBeGreaterThan(0);
    }
  });

  it('coasts to rest after ln(1 + v/(K(f + b)))/α and stays there', () => {
    const body = bodyAt(machine);
    run(body, 40, 3000);
    const { pole, gainForward, coulomb, bias } = plantOf(machine);
    const v = body.velocity;
    const start = body.position;
    const slowing = gainForward * (coulomb + bias);
    const toRest = Math.log1p(v / slowing) / pole;
    const distance = (v + slowing) / pole - slowing * toRest - slowing / pole;
    run(body, 0, Math.ceil(toRest / 0.001) - 1);
    expect(body.velocity).toBeGreaterThan(0);
    run(body, 0, 1);
    expect(body.velocity).toBe(0);
    expect(body.position - start).toBeCloseTo(distance, 9);
    run(body, 0, 1000);
    expect(body.position - start).toBeCloseTo(distance, 9);
  });

  it('does not depend on how finely the same output is sampled', () => {
    const random = randomFrom(3);
    const coarse = bodyAt(machine, 0.002);
    const fine = bodyAt(machine, 0.0001);
    for (let k = 0; k < 500; k++) {
      const output = 20 * random.normal();
      run(coarse, output, 1);
      run(fine, output, 20);
    }
    expect(fine.position).toBeCloseTo(coarse.position, 9);
    expect(fine.velocity).toBeCloseTo(coarse.velocity, 9);
  });

  it('agrees with plain small-step integration of Newton’s law through reversals', () => {
    const random = randomFrom(11);
    const body = bodyAt(machine);
    const dt = 1e-6;
    let y = 0;
    let v = 0;
    for (let k = 0; k < 400; k++) {
      const output = 12 * random.normal();
      body.advance(output);
      for (let i = 0; i < 1000; i++) {
        const { mass, viscous, coulomb, forceForward, forceReverse, offset } = machine;
        let force: number;
        if (v === 0) {
          const push = (output > 0 ? forceForward : forceReverse) * output - offset;
          force = Math.abs(push) <= coulomb ? 0 : push - coulomb * Math.sign(push);
        } else
          force =
            (v > 0 ? forceForward : forceReverse) * output -
            offset -
            coulomb * Math.sign(v) -
            (viscous * v) / 1000;
        const next = v + (1000 * force * dt) / mass;
        v = v !== 0 && Math.sign(next) !== Math.sign(v) ? 0 : next;
        y += v * dt;
      }
      expect(Math.abs(body.position - y)).toBeLessThan(2e-3);
    }
    expect(Math.abs(y)).toBeGreaterThan(0.5);
  });

  it('keeps the energy balance: work in = kinetic + viscous + dry friction + offset', () => {
    const body = bodyAt(machine, 1e-4);
    let workIn = 0;
    let lost = 0;
    for (let k = 0; k < 20_000; k++) {
      const output = 45 * Math.sin(k * 1e-4 * 9);
      const { position, velocity } = body;
      body.advance(output);
      const dy = (body.position - position) / 1000;
      const v = (body.velocity + velocity) / 2000;
      workIn += (v > 0 ? machine.forceForward : machine.forceReverse) * output * dy;
      lost += machine.viscous * v * dy + machine.coulomb * Math.abs(dy) + machine.offset * dy;
    }
    const kinetic = (machine.mass * (body.velocity / 1000) ** 2) / 2;
    expect(workIn).toBeGreaterThan(100);
    expect(Math.abs(workIn - lost - kinetic) / workIn).toBeLessThan(1e-4);
  });

  it.each([0, 0.0004, 0.001, 0.0025, 0.0037])('acts exactly %s s late', (deadTime) => {
    const body = bodyAt({ ...still, deadTime });
    const { pole, gainForward } = plantOf(still);
    for (let k = 1; k <= 100; k++) {
      body.advance(30);
      const t = Math.max(k * 0.001 - deadTime, 0);
      const expected = 30 * gainForward * (t - (1 - Math.exp(-pole * t)) / pole);
      expect(body.position).toBeCloseTo(expected, 9);
    }
  });

  it('keeps the outputs under way when the dead time grows', () => {
    const body = bodyAt({ ...still, deadTime: 0.001 });
    run(body, 10, 5);
    body.change({ ...still, deadTime: 0.004 });
    const before = body.velocity;
    run(body, 0, 3);
    expect(body.velocity).toBeGreaterThan(before);
    expect(Number.isFinite(body.position)).toBe(true);
  });

  it('ends at its hard stops and comes back', () => {
    const body = bodyAt(machine, 0.001, { min: -5, max: 5 });
    run(body, 60, 3000);
    expect([body.position, body.velocity]).toEqual([5, 0]);
    run(body, -60, 20);
    expect(body.position).toBeLessThan(5);
    run(body, -60, 3000);
    expect([body.position, body.velocity]).toEqual([-5, 0]);
  });
});
