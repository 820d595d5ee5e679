import { expect, test } from 'vitest';
import { simulateLoop, simulateMove, type Trajectory } from '../../src/control/move.js';
import {
  maxStableSampleTime,
  outputRipple,
  poleDamping,
  sampledLoop,
  sampledPoles,
} from '../../src/control/sampled-loop.js';
import type { Structure } from '../../src/control/pole-placement.js';
import {
  Agreement,
  type Design,
  gainsOf,
  label,
  type Pair,
  plantOf,
  reference,
  setDistance,
  structures,
} from './reference-data.js';

interface MoveCase extends Design {
  Kv: number;
  Ka: number;
  runs: {
    kind: 'step' | 'raised_cosine';
    D: number;
    T: number | null;
    N: number;
    structure: Structure;
    ff: boolean;
    antiwindup: 'hard' | 'conditional';
    peak_fe: number;
    rms_fe: number;
    sat_pct: number;
    overshoot_mm: number;
    final_err: number;
    checkpoints: [number, number, number, number, number][];
    rounding_sensitive?: boolean;
  }[];
}

test('reference part 5, the saturated move to 1e-5 mm and 0.01 %', { timeout: 60_000 }, () => {
  const agreement = new Agreement();
  let runs = 0;
  for (const c of reference<MoveCase>('5_saturated_sim'))
    for (const run of c.runs) {
      if (run.rounding_sensitive) continue;
      runs++;
      const duration = run.T ?? 1;
      const move = simulateMove(
        plantOf(c),
        { ...gainsOf(c), kv: run.ff ? c.Kv : 0, ka: run.ff ? c.Ka : 0 },
        run.structure,
        { sampleTime: 0.001, antiWindup: run.antiwindup === 'hard' ? 'clamp' : 'conditional' },
        {
          distance: run.D,
          duration,
          settle: run.N * 0.001 - duration,
          profile: run.kind === 'step' ? 'step' : 'raised-cosine',
        },
      );
      const at = `${label(c)} ${run.kind} ${run.D} ${run.structure} ${run.ff} ${run.antiwindup}`;
      const { position, output, integrator } = move.trace;
      agreement.check(`${at} N`, position.length, run.N, 0);
      agreement.check(`${at} peak`, move.peakFollowingError, run.peak_fe, 0, 1e-5);
      agreement.check(`${at} rms`, move.rmsFollowingError, run.rms_fe, 0, 1e-5);
      agreement.check(`${at} saturated`, move.saturatedPct, run.sat_pct, 0, 0.01);
      agreement.check(`${at} overshoot`, move.overshoot, run.overshoot_mm, 0, 1e-5);
      const last = move.trajectory.target[run.N - 1]! - position[run.N - 1]!;
      agreement.check(`${at} final`, last, run.final_err, 0, 1e-5);
      for (const [k, r, y, u, i] of run.checkpoints) {
        agreement.check(`${at} r(${k})`, move.trajectory.target[k], r, 0, 1e-5);
        agreement.check(`${at} y(${k})`, position[k], y, 0, 1e-5);
        agreement.check(`${at} u(${k})`, output[k], u, 0, 1e-5);
        agreement.check(`${at} I(${k})`, integrator[k], i, 0, 1e-5);
      }
    }
  expect(agreement.found).toEqual([]);
  expect(runs).toBe(1404);
});

interface SampledCase extends Design {
  per_Ts: {
    Ts: number;
    eigenvalues: Pair[];
    spectral_radius: number;
    stable: boolean;
    min_equiv_damping: number;
  }[];
  Ts_max_backward: number;
  Ts_max_delay1: number;
}

test('reference part 6, eigenvalues to 1e-8 and the largest stable sample time to 1e-6', () => {
  const agreement = new Agreement();
  for (const c of reference<SampledCase>('6_sampled_eig')) {
    const plant = plantOf(c);
    const gains = gainsOf(c);
    for (const s of c.per_Ts) {
      const at = `${label(c)} ${s.Ts}`;
      const poles = sampledPoles(plant, gains, s.Ts);
      agreement.check(
        `${at} set`,
        setDistance(poles, s.eigenvalues, () => 1),
        0,
        0,
        1e-8,
      );
      agreement.check(`${at} ρ`, Math.hypot(poles[0]!.re, poles[0]!.im), s.spectral_radius, 1e-8);
      const damping = Math.min(...poles.map(poleDamping));
      agreement.check(`${at} ζ`, damping, s.min_equiv_damping, 1e-5);
      agreement.check(
        `${at} stable`,
        Number(sampledLoop(plant, gains, { sampleTime: s.Ts }).stable),
        Number(s.stable),
        0,
      );
    }
    agreement.check(`${label(c)} Tmax`, maxStableSampleTime(plant, gains), c.Ts_max_backward, 1e-6);
    agreement.check(`${label(c)} Tmax delayed`, maxStableSampleTime(plant, gains, 1), c.Ts_max_delay1, 1e-6);
  }
  expect(agreement.found).toEqual([]);
  expect(agreement.compared).toBe(39 * (5 * 4 + 2));
});

interface RippleCase extends Design {
  H2_noise_to_u: number;
  rms_u_unquantised_draw0: Record<Structure, number>;
  q: {
    q_mm: number;
    PI_D_rms_u: number[];
    PI_D_rms_u_mean: number;
    PID_rms_u_draw0: number;
    I_PD_rms_u_draw0: number;
    theory_rms_u: number;
    rel_change_under_1e12_perturbation: number;
  }[];
}

test('reference part 7, white-noise output ripple to 1e-6', () => {
  const agreement = new Agreement();
  for (const c of reference<RippleCase>('7_quantisation')) {
    const ripple = (q: number): number | null => outputRipple(plantOf(c), gainsOf(c), 0.001, 0, q);
    agreement.check(`${label(c)} ‖H‖₂`, ripple(Math.sqrt(12)), c.H2_noise_to_u, 1e-6);
    for (const q of c.q) agreement.check(`${label(c)} ${q.q_mm}`, ripple(q.q_mm), q.theory_rms_u, 1e-6);
  }
  expect(agreement.found).toEqual([]);
  expect(agreement.compared).toBe(39 * 4);
});

/** Draw 0 of the reference's dither: phase and encoder offset as shares of a turn and of a count. */
const PHASE = 4.188647300746545;
const OFFSET = 0.05617939010977746;

test('reference part 7, the quantised loop run tick by tick', () => {
  const agreement = new Agreement();
  const n = 20_000;
  const target = new Float64Array(n).map((_, k) => 0.01 * Math.sin(2 * Math.PI * 0.7 * k * 0.001 + PHASE));
  const trajectory: Trajectory = { target, velocity: new Float64Array(n), acceleration: new Float64Array(n) };
  for (const c of reference<RippleCase>('7_quantisation').slice(0, 12)) {
    for (const q of c.q) {
      // the encoder's offset is a shift of the plant's origin
      const run = (structure: Structure): number => {
        const trace = simulateLoop(
          plantOf(c),
          gainsOf(c),
          structure,
          { sampleTime: 0.001, resolution: q.q_mm },
          trajectory,
          { position: target[0]! + OFFSET * q.q_mm, derivative: 'first-sample' },
        );
        let sum = 0;
        for (let k = 1000; k < n; k++) sum += trace.output[k]! ** 2;
        return Math.sqrt(sum / (n - 1000));
      };
      const at = `${label(c)} ${q.q_mm}`;
      agreement.check(`${at} PI-D`, run('PI-D'), q.PI_D_rms_u[0]!, 0.02, 2e-6);
      agreement.check(`${at} PID`, run('PID'), q.PID_rms_u_draw0, 0.02, 2e-6);
    }
  }
  expect(agreement.found).toEqual([]);
  expect(structures).toHaveLength(3);
});
