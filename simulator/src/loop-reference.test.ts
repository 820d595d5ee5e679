import { describe, expect, it } from 'vitest';
import { Controller, type Structure } from './controller.js';
import { Body } from './physics.js';

/*
 * Saturated raised-cosine moves of 90 mm in 0.24 s at 1 kHz with the literal integrator clamp, K = 5.2, α = 75,
 * λ = 90, without feed-forward. Figures and rows [k, r, y, u] made with NumPy 1.24 by a script that shares nothing
 * with this project (design O03 of the saturated reference simulations). Ours differ by the output register's steps
 * of 0.01 % and by gains in single precision.
 */
const GAINS = { kp: 62.30769230769231, ki: 1869.2307692307693, kd: 0.5, kv: 0, ka: 0 };
const REFERENCE: Record<Structure, { peakError: number; rows: [number, number, number, number][] }> = {
  PID: {
    peakError: 4.38189,
    rows: [
      [10, 0.38498, 0.1596466, 30.89297],
      [60, 13.18019, 12.5249061, 95.79128],
      [120, 45, 42.3453965, 100],
      [239, 89.99614, 90.5382382, -18.28756],
      [290, 90, 90.0305561, -0.02361],
      [1489, 90, 90, 0],
    ],
  },
  'PI-D': {
    peakError: 6.05199,
    rows: [
      [10, 0.38498, 0.0468671, 15.93346],
      [60, 13.18019, 10.8588903, 97.61894],
      [120, 45, 40.6752594, 100],
      [239, 89.99614, 92.0218126, -15.86494],
      [290, 90, 90.390554, -1.42782],
      [1489, 90, 90, 0],
    ],
  },
  'I-PD': {
    peakError: 20.27976,
    rows: [
      [10, 0.38498, 0.0033994, 1.89338],
      [60, 13.18019, 3.998762, 56.78941],
      [120, 45, 26.6732825, 100],
      [239, 89.99614, 83.8646557, 30.60044],
      [290, 90, 89.6258872, 0.91507],
      [1489, 90, 90, 0],
    ],
  },
};

describe('body and controller together', () => {
  it.each(Object.entries(REFERENCE))(
    'agree with the reference simulation: %s',
    (structure, { peakError, rows }) => {
      const T = 0.001;
      const physics = {
        mass: 10,
        viscous: 750,
        coulomb: 0,
        forceForward: 3.9,
        forceReverse: 3.9,
        offset: 0,
        deadTime: 0,
      };
      const body = new Body(physics, T, { min: -1e3, max: 1e3 }, 0);
      const controller = new Controller(T);
      controller.start(GAINS, structure as Structure, 0);
      let peak = 0;
      for (let k = 0; k < 1490; k++) {
        const r = k < 240 ? 45 * (1 - Math.cos((Math.PI * k) / 240)) : 90;
        const y = body.position;
        const u = controller.tick({ position: r, velocity: 0, acceleration: 0 }, y);
        peak = Math.max(peak, Math.abs(r - y));
        const row = rows.find(([at]) => at === k);
        if (row) {
          expect(Math.abs(r - row[1])).toBeLessThan(1e-5);
          expect(Math.abs(y - row[2])).toBeLessThan(2e-3);
          expect(Math.abs(u - row[3])).toBeLessThan(0.12);
        }
        body.advance(u);
      }
      expect(Math.abs(peak - peakError)).toBeLessThan(2e-3);
    },
  );
});
