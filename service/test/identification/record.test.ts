import { readFileSync } from 'node:fs';
import { describe, expect, test } from 'vitest';
import { identifyRecord, type MotionRecord } from '../../src/identification/identify-record.js';
import type { Interval } from '../../src/identification/plant-estimate.js';
import { physicsOf, randomAxis, TestAxis, type AxisRecord } from './test-axis.js';

const TRACES = new URL('../references/traces/', import.meta.url);

interface Truth {
  rate_hz: number;
  K_mean: number;
  K_pos: number;
  K_neg: number;
  a_mean: number;
  coulomb_pct: number;
  delay_s: number;
  K_drift: number;
  a_drift: number;
}
const truths = (
  JSON.parse(readFileSync(new URL('truth.json', TRACES), 'utf8')) as { traces: Record<string, Truth> }
).traces;

/** A trace on its grid, NaN where its rows are missing. */
function readTrace(file: string, rate: number): MotionRecord {
  const rows = readFileSync(new URL(file, TRACES), 'utf8')
    .trim()
    .split('\n')
    .slice(1)
    .map((line) => line.split(',').map(Number));
  const n = Math.round(rows.at(-1)![0]! * rate) + 1;
  const position = new Float64Array(n).fill(NaN);
  const output = new Float64Array(n).fill(NaN);
  for (const [time, , y, u] of rows) {
    const k = Math.round(time! * rate);
    position[k] = y!;
    output[k] = u!;
  }
  return { sampleTime: 1 / rate, position, output };
}

const recordOf = ({ sampleTime, resolution, position, output }: AxisRecord): MotionRecord => ({
  sampleTime,
  position: Float64Array.from(position, (counts) => counts * resolution),
  output: Float64Array.from(output, (hundredths) => hundredths / 100),
});
const covers = ({ low, high }: Interval, value: number): boolean => low <= value && value <= high;

describe('recorded traces with known plants (references/traces)', () => {
  test.each(Object.entries(truths))('%s', (file, truth) => {
    const { estimate, verdict, remarks } = identifyRecord(readTrace(file, truth.rate_hz));
    expect(verdict).toBe('usable');
    const { gain, pole, gainForward, gainReverse, coulomb, bias, deadTime } = estimate!;
    const drifting = truth.K_drift !== 0 || truth.a_drift !== 0;
    expect(Math.abs(gain.value / truth.K_mean - 1)).toBeLessThan(drifting ? 0.01 : 0.005);
    expect(Math.abs(pole.value / truth.a_mean - 1)).toBeLessThan(drifting ? 0.08 : 0.02);
    expect(Math.abs(coulomb.value - truth.coulomb_pct)).toBeLessThan(Math.max(0.05 * truth.coulomb_pct, 0.1));
    expect(Math.abs(bias.value)).toBeLessThan(0.1);
    expect(Math.abs(deadTime - truth.delay_s)).toBeLessThan(0.5 / truth.rate_hz);
    if (truth.K_pos === truth.K_neg) {
      expect(gainForward).toBeUndefined();
      expect(gainReverse).toBeUndefined();
    } else {
      expect(Math.abs(gainForward!.value / truth.K_pos - 1)).toBeLessThan(0.005);
      expect(Math.abs(gainReverse!.value / truth.K_neg - 1)).toBeLessThan(0.005);
    }
    if (drifting) {
      const missed = [
        covers(gain, truth.K_mean),
        covers(pole, truth.a_mean),
        covers(coulomb, truth.coulomb_pct),
        covers(bias, 0),
      ].filter((covered) => !covered);
      expect(missed.length).toBeLessThanOrEqual(1);
    }
    expect(remarks.some((remark) => remark.includes('over the record'))).toBe(drifting);
  });
});

test('the 95 % intervals of K and α cover the truth in 90 … 99 % of 200 simulated records', () => {
  const covered = { gain: 0, pole: 0, coulomb: 0, bias: 0 };
  for (let seed = 1; seed <= 200; seed++) {
    const { setup, ...truth } = randomAxis(seed, { dwell: 0.3 });
    const { estimate, verdict } = identifyRecord(recordOf(new TestAxis(setup).run(12)));
    expect(verdict, `seed ${seed}`).not.toBe('unidentifiable');
    for (const name of ['gain', 'pole', 'coulomb', 'bias'] as const)
      if (covers(estimate![name], truth[name])) covered[name]++;
  }
  for (const name of ['gain', 'pole'] as const) {
    expect(covered[name], name).toBeGreaterThanOrEqual(180);
    expect(covered[name], name).toBeLessThanOrEqual(198);
  }
  expect(covered.coulomb).toBeGreaterThanOrEqual(175);
  expect(covered.bias).toBeGreaterThanOrEqual(175);
});

test('the published parameters of the electro-mechanical positioning system come back', () => {
  // A. Janot, M. Gautier, M. Brunot, Data Set and Reference Models of EMPS, 2019: 25 s at 1 kHz, ±10 V.
  const mass = 95.1089; // kg
  const viscous = 203.5034; // N·s/m
  const coulomb = 20.3935; // N
  const offset = -3.1648; // N
  const force = 35.15 / 10; // N per % of 10 V
  const physics = {
    mass: mass / 1000,
    viscous: viscous / 1000,
    coulomb,
    stiction: coulomb,
    forceForward: force,
    forceReverse: force,
    offset,
    deadTime: 0,
  };
  const gain = force / physics.viscous; // (mm/s)/%
  const pole = viscous / mass;
  const axis = new TestAxis({
    physics,
    designGain: gain,
    designPole: pole,
    lambda: 20,
    sampleTime: 0.001,
    resolution: 0.001,
    noise: 0.0003,
    feedForward: true,
    distance: 240,
    speed: 250,
    dwell: 0.3,
    seed: 11,
  });
  const { estimate, verdict } = identifyRecord(recordOf(axis.run(25)));
  expect(verdict).toBe('usable');
  expect(Math.abs(estimate!.gain.value / gain - 1)).toBeLessThan(0.005);
  expect(Math.abs(estimate!.pole.value / pole - 1)).toBeLessThan(0.02);
  expect(Math.abs(estimate!.coulomb.value / (coulomb / force) - 1)).toBeLessThan(0.05);
  expect(Math.abs(estimate!.bias.value - offset / force)).toBeLessThan(0.1);
  expect(estimate!.deadTime).toBeLessThan(0.0005);
});

describe('what a record cannot say', () => {
  const { setup } = randomAxis(4);
  const whole = recordOf(new TestAxis(setup).run(12));

  test('an axis at rest', () => {
    const n = 5000;
    const { verdict, estimate, remarks } = identifyRecord({
      sampleTime: 0.001,
      position: new Float64Array(n).fill(12),
      output: new Float64Array(n).fill(1),
    });
    expect(verdict).toBe('unidentifiable');
    expect(estimate).toBeNull();
    expect(remarks).toEqual(['the axis never moves in this record']);
  });

  test('an output of the wrong sign', () => {
    const { verdict, estimate, remarks } = identifyRecord({ ...whole, output: whole.output.map((u) => -u) });
    expect(verdict).toBe('unidentifiable');
    expect(estimate).toBeNull();
    expect(remarks[0]).toContain('sign of the output');
  });

  test('one speed only', () => {
    const { verdict, estimate } = identifyRecord({
      sampleTime: 0.001,
      position: Float64Array.from({ length: 4000 }, (_, k) => k * 0.1),
      output: new Float64Array(4000).fill(10),
    });
    expect(verdict).toBe('unidentifiable');
    expect(estimate).toBeNull();
  });

  test('less than a second of motion', () => {
    const still = new Float64Array(3000);
    const { verdict, estimate, remarks } = identifyRecord({
      sampleTime: 0.001,
      position: Float64Array.from({ length: 3000 }, (_, k) =>
        k < 2500 ? 0 : 100 * (1 - Math.cos((k - 2500) / 160)),
      ),
      output: still,
    });
    expect(verdict).toBe('unidentifiable');
    expect(estimate).toBeNull();
    expect(remarks[0]).toMatch(/only 0\.\d s of motion/);
  });

  test('one direction only: friction and offset are one', () => {
    const physics = physicsOf({ gain: 8, pole: 20, coulomb: 1.5, bias: 0.5 });
    const axis = new TestAxis({ ...setup, physics, designGain: 8, designPole: 20, sampleTime: 0.001 });
    const both = recordOf(axis.run(20));
    const forward: number[] = [];
    for (let k = 0; k < both.position.length - 40; k++)
      if (both.position[k + 40]! - both.position[k]! >= 0) forward.push(k);
    // Reverse travel cut out: rows missing.
    const kept = new Set(forward);
    const { estimate, remarks } = identifyRecord({
      sampleTime: both.sampleTime,
      position: both.position.map((y, k) => (kept.has(k) ? y : NaN)),
      output: both.output.map((u, k) => (kept.has(k) ? u : NaN)),
    });
    expect(Math.abs(estimate!.gain.value / 8 - 1)).toBeLessThan(0.005);
    expect(remarks).toContain('motion forward only: dry friction and offset cannot be told apart');
    expect(covers(estimate!.coulomb, 1.5)).toBe(true);
    expect(covers(estimate!.bias, 0.5)).toBe(true);
  });
});
