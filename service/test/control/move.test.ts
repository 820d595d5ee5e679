import { describe, expect, test } from 'vitest';
import {
  MAX_MOVE_SAMPLES,
  moveTrajectory,
  simulateLoop,
  simulateMove,
  type LoopTrace,
  type Move,
} from '../../src/control/move.js';
import { UnphysicalInputError, zeroOrderHold, type Plant } from '../../src/control/plant.js';
import { placeGains, type Gains } from '../../src/control/pole-placement.js';

const T = 0.001;
const plant: Plant = { gain: 8, pole: 25 };
const OPEN: Gains = { kp: 0, ki: 0, kd: 0, kv: 1, ka: 0 };

/** Drives the plant open loop: the feed-forward passes the wanted output through the controller. */
function drive(p: Plant, outputs: readonly number[], sampleTime = T, delay = 0): LoopTrace {
  return simulateLoop(
    p,
    OPEN,
    'PID',
    { sampleTime, outputDelaySamples: delay },
    {
      target: new Float64Array(outputs.length),
      velocity: Float64Array.from(outputs),
      acceleration: new Float64Array(outputs.length),
    },
  );
}

/** The same friction, integrated in steps a thousand times finer by brute force. */
function bruteForce(p: Plant, outputs: readonly number[]): { y: number; v: number }[] {
  const fine = 1000;
  const h = T / fine;
  const f = p.coulomb ?? 0;
  let y = 0;
  let v = 0;
  return outputs.map((u) => {
    const here = { y, v };
    for (let i = 0; i < fine; i++) {
      const w = u - (p.bias ?? 0);
      if (v === 0 && Math.abs(w) <= f) continue;
      const direction = v !== 0 ? Math.sign(v) : Math.sign(w);
      let next = v + h * (-p.pole * v + p.gain * p.pole * (w - f * direction));
      if (v !== 0 && next > 0 !== v > 0) next = 0;
      y += (h * (v + next)) / 2;
      v = next;
    }
    return here;
  });
}

describe('Coulomb friction', () => {
  const worn: Plant = { ...plant, coulomb: 6, bias: 1.5 };
  test('holds the axis while the drive stays within it', () => {
    const { position, velocity } = drive(worn, new Array<number>(100).fill(7.4));
    expect(Math.max(...position.map(Math.abs))).toBe(0);
    expect(Math.max(...velocity.map(Math.abs))).toBe(0);
    expect(drive(worn, new Array<number>(100).fill(7.6)).position[99]).toBeGreaterThan(0);
  });
  test('brings it to rest inside a sample at ln(1 + v/(Kf))/α and keeps it there', () => {
    const outputs = [...new Array<number>(50).fill(40), ...new Array<number>(200).fill(1.5)];
    const { position, velocity } = drive(worn, outputs);
    const v0 = velocity[50]!;
    const stop = Math.log1p(v0 / (8 * 6)) / 25;
    const resting = 50 + Math.ceil(stop / T);
    expect(velocity[resting - 1]).toBeGreaterThan(0);
    for (let k = resting; k < outputs.length; k++) {
      expect(velocity[k]).toBe(0);
      expect(position[k]).toBe(position[resting]);
    }
    // distance from v' = −αv − Kαf until rest: (v0 − Kαf·t*)/α
    expect(position[resting]! - position[50]!).toBeCloseTo((v0 - 8 * 25 * 6 * stop) / 25, 9);
  });
  test('reverses inside a sample exactly', () => {
    const outputs = Array.from({ length: 300 }, (_, k) => 30 * Math.sin(k / 9) + 10 * Math.sin(k / 2.3));
    const exact = drive(worn, outputs);
    const brute = bruteForce(worn, outputs);
    let turns = 0;
    brute.forEach(({ y, v }, k) => {
      if (k > 0 && exact.velocity[k]! * exact.velocity[k - 1]! < 0) turns++;
      expect(Math.abs(exact.position[k]! - y)).toBeLessThan(2e-4);
      expect(Math.abs(exact.velocity[k]! - v)).toBeLessThan(0.02);
    });
    expect(turns).toBeGreaterThan(5);
  });
  test('does not depend on where the samples are cut', () => {
    const coarse = Array.from({ length: 60 }, (_, k) => 30 * Math.sin(k));
    const fine = coarse.flatMap((u) => [u, u, u, u]);
    const a = drive(worn, coarse);
    const b = drive(worn, fine, T / 4);
    coarse.forEach((_, k) => {
      expect(b.position[4 * k]).toBeCloseTo(a.position[k]!, 10);
      expect(b.velocity[4 * k]).toBeCloseTo(a.velocity[k]!, 8);
    });
  });
});

describe('dead time and delay', () => {
  const outputs = Array.from({ length: 80 }, (_, k) => 40 * Math.sin(k / 5));
  test('a dead time of whole samples is an output delay', () => {
    const dead = drive({ ...plant, deadTime: 0.003 }, outputs);
    expect([...dead.position]).toEqual([...drive(plant, outputs, T, 3).position]);
  });
  test('a fraction of a sample splits the hold exactly', () => {
    // the same pieces of constant input on a grid ten times finer
    const fine = outputs.flatMap((u) => new Array<number>(10).fill(u));
    const coarse = drive({ ...plant, coulomb: 2, deadTime: 0.0034 }, outputs);
    const shifted = drive({ ...plant, coulomb: 2 }, fine, T / 10, 34);
    outputs.forEach((_, k) => expect(shifted.position[10 * k]).toBeCloseTo(coarse.position[k]!, 9));
  });
});

describe('bias and resolution', () => {
  test('an axis that holds against its bias does not start with a jump', () => {
    const biased = { ...plant, bias: 5 };
    const gains = placeGains(biased, 'PI-D', { kind: 'triple', lambda: 40 }, true);
    const move: Move = { distance: 100, duration: 1, profile: 'raised-cosine' };
    const cold = simulateMove(biased, gains, 'PI-D', { sampleTime: T }, move);
    const holding = simulateMove(biased, gains, 'PI-D', { sampleTime: T }, move, { output: 5 });
    const plain = simulateMove(plant, gains, 'PI-D', { sampleTime: T }, move);
    expect(holding.peakFollowingError).toBeCloseTo(plain.peakFollowingError, 9);
    expect(cold.peakFollowingError).toBeGreaterThan(holding.peakFollowingError);
  });
  test('the controller sees whole counts only', () => {
    const q = 0.01;
    const gains = placeGains(plant, 'PI-D', { kind: 'triple', lambda: 40 }, false);
    const move = simulateMove(
      plant,
      { ...gains, ki: 0, kd: 0 },
      'PI-D',
      { sampleTime: T, resolution: q },
      {
        distance: 1,
        duration: 0.2,
        profile: 'step',
      },
    );
    move.trace.output.forEach((u, k) => {
      const seen = move.trajectory.target[k]! - u / gains.kp;
      expect(Math.abs(seen / q - Math.round(seen / q))).toBeLessThan(1e-6);
      expect(Math.abs(seen - move.trace.position[k]!)).toBeLessThanOrEqual(q / 2 + 1e-9);
    });
  });
});

test('the literal clamp drags the integrator and runs backwards after a kick; the conditional one does not', () => {
  const gains = placeGains(plant, 'PID', { kind: 'triple', lambda: 40 }, false);
  const move: Move = { distance: 30, duration: 1, profile: 'step' };
  const dragged = simulateMove(plant, gains, 'PID', { sampleTime: T, antiWindup: 'clamp' }, move);
  const kept = simulateMove(plant, gains, 'PID', { sampleTime: T, antiWindup: 'conditional' }, move);
  expect(Math.min(...dragged.trace.position)).toBeLessThan(-0.1);
  expect(Math.min(...kept.trace.position)).toBe(0);
});

test('the raised cosine starts and ends at rest, its derivatives are those of its position', () => {
  const { target, velocity, acceleration } = moveTrajectory(
    { distance: -36, duration: 0.4, settle: 0.1, profile: 'raised-cosine' },
    T,
  );
  expect(target).toHaveLength(500);
  expect(target[0]).toBe(-0);
  expect(target[400]).toBe(-36);
  for (let k = 2; k < 398; k++) {
    expect((target[k + 1]! - target[k - 1]!) / (2 * T)).toBeCloseTo(velocity[k]!, 1);
    expect((velocity[k + 1]! - velocity[k - 1]!) / (2 * T)).toBeCloseTo(acceleration[k]!, 0);
  }
});

test('the exact hold is the limit of many small ones', () => {
  const whole = zeroOrderHold(plant, 0.1);
  const part = zeroOrderHold(plant, 0.1 / 1024);
  let y = 0;
  let v = 0;
  for (let i = 0; i < 1024; i++) {
    y += part.positionFromVelocity * v + part.positionFromOutput;
    v = part.decay * v + part.velocityFromOutput;
  }
  expect(y).toBeCloseTo(whole.positionFromOutput, 11);
  expect(v).toBeCloseTo(whole.velocityFromOutput, 11);
});

describe('what cannot be simulated is refused by name', () => {
  const gains = placeGains(plant, 'PID', { kind: 'triple', lambda: 40 }, false);
  const move: Move = { distance: 1, duration: 1, profile: 'step' };
  const path = (act: () => unknown): string => {
    try {
      act();
    } catch (error) {
      if (error instanceof UnphysicalInputError) return error.path;
    }
    return 'not refused';
  };
  test.each([
    ['plant.gain', () => simulateMove({ gain: NaN, pole: 1 }, gains, 'PID', { sampleTime: T }, move)],
    ['plant.pole', () => simulateMove({ gain: 1, pole: -1 }, gains, 'PID', { sampleTime: T }, move)],
    ['plant.deadTime', () => simulateMove({ ...plant, deadTime: 2 }, gains, 'PID', { sampleTime: T }, move)],
    ['plant.coulomb', () => simulateMove({ ...plant, coulomb: -1 }, gains, 'PID', { sampleTime: T }, move)],
    ['plant.bias', () => simulateMove({ ...plant, bias: Infinity }, gains, 'PID', { sampleTime: T }, move)],
    ['gains.kd', () => simulateMove(plant, { ...gains, kd: NaN }, 'PID', { sampleTime: T }, move)],
    ['controller.sampleTime', () => simulateMove(plant, gains, 'PID', { sampleTime: 0 }, move)],
    [
      'controller.resolution',
      () => simulateMove(plant, gains, 'PID', { sampleTime: T, resolution: -1 }, move),
    ],
    [
      'controller.outputLimit',
      () => simulateMove(plant, gains, 'PID', { sampleTime: T, outputLimit: 0 }, move),
    ],
    ['move.distance', () => simulateMove(plant, gains, 'PID', { sampleTime: T }, { ...move, distance: NaN })],
    ['move.settle', () => simulateMove(plant, gains, 'PID', { sampleTime: T }, { ...move, settle: -1 })],
    [
      'move.duration',
      () => simulateMove(plant, gains, 'PID', { sampleTime: T }, { ...move, duration: MAX_MOVE_SAMPLES * T }),
    ],
  ])('%s', (name, act) => expect(path(act)).toBe(name));
});
