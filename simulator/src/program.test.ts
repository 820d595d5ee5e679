import { describe, expect, it } from 'vitest';
import { profileAt, Program, type Profile, type Step } from './program.js';
import { randomFrom } from './random.js';

const T = 0.001;
const steps: Step[] = [
  { to: 200, in: 0.5, profile: 'raised-cosine', dwell: 0.3 },
  { to: 0, in: 0.4, profile: 'trapezoid', dwell: 0.2 },
];
const programOf = (seed = 1): Program => new Program(steps, T, randomFrom(seed));

/** Starts and ends of the moves in a stretch of time. */
function movesOf(program: Program, seconds: number): { distance: number; duration: number }[] {
  const moves: { distance: number; duration: number }[] = [];
  let last = program.tick().position;
  let began = NaN;
  let from = last;
  for (let k = 0; k < seconds / T; k++) {
    const { position } = program.tick();
    if (position !== last && Number.isNaN(began)) [began, from] = [k, last];
    if (!program.moving && !Number.isNaN(began)) {
      moves.push({ distance: position - from, duration: (k - began + 1) * T });
      began = NaN;
    }
    last = position;
  }
  return moves;
}

describe('profileAt', () => {
  it.each<Profile>(['raised-cosine', 'trapezoid'])(
    '%s goes from 0 to 1 and its derivatives belong to it',
    (profile) => {
      expect(profileAt(profile, 0).position).toBeCloseTo(0, 12);
      expect(profileAt(profile, 1).position).toBeCloseTo(1, 12);
      expect(profileAt(profile, 0).velocity).toBeCloseTo(0, 12);
      expect(profileAt(profile, 1).velocity).toBeCloseTo(0, 12);
      const h = 1e-5;
      for (const s of [0.03, 0.2, 0.31, 0.5, 0.66, 0.8, 0.97]) {
        const [a, b, c] = [profileAt(profile, s - h), profileAt(profile, s), profileAt(profile, s + h)];
        expect((c.position - a.position) / (2 * h)).toBeCloseTo(b.velocity, 6);
        expect((c.velocity - a.velocity) / (2 * h)).toBeCloseTo(b.acceleration, 5);
      }
    },
  );
});

describe('Program', () => {
  it('repeats its moves with the programmed duration and nearly the programmed distance', () => {
    const moves = movesOf(programOf(), 30);
    expect(moves.length).toBeGreaterThan(35);
    moves.forEach(({ distance, duration }, i) => {
      expect(Math.abs(distance - (i % 2 === 0 ? 200 : -200))).toBeLessThan(2);
      expect(duration).toBeCloseTo(i % 2 === 0 ? 0.5 : 0.4, 6);
    });
    expect(new Set(moves.map(({ distance }) => distance)).size).toBeGreaterThan(10);
  });

  it('is the same for the same seed and another for another', () => {
    const trace = (seed: number): number[] => {
      const program = programOf(seed);
      return Array.from({ length: 8000 }, () => program.tick().position);
    };
    expect(trace(4)).toEqual(trace(4));
    expect(trace(4)).not.toEqual(trace(5));
  });

  it('when held finishes its move and stays, then goes on', () => {
    const program = programOf();
    while (!program.moving) program.tick();
    program.hold();
    const steady: number[] = [];
    for (let k = 0; k < 5000; k++) {
      const { position, velocity } = program.tick();
      if (k >= 600) steady.push(position, velocity);
    }
    expect(new Set(steady.filter((_, i) => i % 2 === 0)).size).toBe(1);
    expect(steady.every((value, i) => i % 2 === 0 || value === 0)).toBe(true);
    program.release();
    expect(movesOf(program, 3).length).toBeGreaterThan(1);
  });

  it('runs at a multiple of its speed', () => {
    const program = programOf();
    program.speed = 2;
    expect(movesOf(program, 3)[0]!.duration).toBeCloseTo(0.25, 6);
  });
});
