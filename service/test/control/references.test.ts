import { describe, expect, test } from 'vitest';
import { frequencyResponse, margins } from '../../src/control/frequency-response.js';
import { characteristicPolynomial, closedLoop, steadyErrors } from '../../src/control/loop.js';
import { incrementEquation, plantFromIncrements, zeroOrderHold } from '../../src/control/plant.js';
import { patternPolynomial, placeGains } from '../../src/control/pole-placement.js';
import { stepFigures } from '../../src/control/step-response.js';
import {
  Agreement,
  type Design,
  gainsOf,
  label,
  type Pair,
  patternOf,
  plantOf,
  reference,
  setDistance,
  structures,
} from './reference-data.js';

const magnitude = (z: Pair): number => Math.hypot(z[0], z[1]);

interface GainsCase extends Design {
  spec: Parameters<typeof patternOf>[0];
  desired_poly: number[];
  char_poly: number[];
  Kv_ff: number;
  Ka_ff: number;
  roots_highprec: Pair[];
  desired_roots: Pair[];
}

describe('reference part 1, gains and roots', () => {
  const cases = reference<GainsCase>('1_gains');
  test('has all 39 designs', () => expect(cases).toHaveLength(39));
  test('gains to 1e-12, polynomials to 1e-9', () => {
    const agreement = new Agreement();
    for (const c of cases) {
      const plant = plantOf(c);
      const pattern = patternOf(c.spec);
      const gains = placeGains(plant, 'PID', pattern, true);
      const scale = c.desired_poly[1]! / (c.K * c.a);
      agreement.check(`${label(c)} Kp`, gains.kp, c.Kp, 1e-12);
      agreement.check(`${label(c)} Ki`, gains.ki, c.Ki, 1e-12);
      agreement.check(`${label(c)} Kd`, gains.kd, c.Kd, 1e-12, 1e-15 * scale);
      agreement.check(`${label(c)} Kv`, gains.kv, c.Kv_ff, 1e-12);
      agreement.check(`${label(c)} Ka`, gains.ka, c.Ka_ff, 1e-12);
      const desired = patternPolynomial(pattern).toReversed();
      const reached = characteristicPolynomial(plant, gainsOf(c)).coefficients.toReversed();
      c.desired_poly.forEach((d, i) => agreement.check(`${label(c)} d${3 - i}`, desired[i], d, 1e-9));
      c.char_poly.forEach((d, i) => agreement.check(`${label(c)} Δ${3 - i}`, reached[i], d, 1e-9));
    }
    expect(agreement.found).toEqual([]);
    expect(agreement.compared).toBe(39 * 13);
  });
  test('poles to 1e-9, the triple ones as three equal reals', () => {
    const off: string[] = [];
    for (const c of cases) {
      const poles = closedLoop(plantOf(c), gainsOf(c), 'PID').poles;
      if (!(setDistance(poles, c.desired_roots, magnitude) <= 1e-9)) off.push(label(c));
      if (c.pattern === 'triple' && poles.some((z) => z.im !== 0 || z.re !== poles[0]!.re))
        off.push(`${label(c)} is split`);
    }
    expect(off).toEqual([]);
  });
});

interface HoldCase {
  id: string;
  K: number;
  a: number;
  zoh: { Ts: number; Phi: Pair[]; Gamma: number[]; A1: number; B1: number; B2: number }[];
}

test('reference part 2, zero-order hold to 1e-11', () => {
  const agreement = new Agreement();
  for (const c of reference<HoldCase>('2_zoh'))
    for (const z of c.zoh) {
      const plant = { gain: c.K, pole: c.a };
      const at = `${c.id} ${z.Ts}`;
      const held = zeroOrderHold(plant, z.Ts);
      agreement.check(`${at} Φ01`, held.positionFromVelocity, z.Phi[0]![1], 1e-11);
      agreement.check(`${at} Φ11`, held.decay, z.Phi[1]![1], 1e-11);
      agreement.check(`${at} Γ0`, held.positionFromOutput, z.Gamma[0]!, 1e-11);
      agreement.check(`${at} Γ1`, held.velocityFromOutput, z.Gamma[1]!, 1e-11);
      const equation = incrementEquation(plant, z.Ts);
      agreement.check(`${at} a`, equation.a, z.A1, 1e-11);
      agreement.check(`${at} b1`, equation.b1, z.B1, 1e-11);
      agreement.check(`${at} b2`, equation.b2, z.B2, 1e-11);
      const back = plantFromIncrements(equation, z.Ts);
      agreement.check(`${at} K`, back?.gain, c.K, 1e-11);
      agreement.check(`${at} α`, back?.pole, c.a, 1e-11);
    }
  expect(agreement.found).toEqual([]);
  expect(agreement.compared).toBe(13 * 5 * 9);
});

interface MarginsCase extends Design {
  open_loop: {
    gain_crossovers: { w_rad_s: number; phase_margin_deg: number; delay_margin_s: number }[];
    phase_margin_deg: number | null;
    delay_margin_s: number | null;
    phase_crossovers: { w_rad_s: number }[];
    gain_margin_upper_dB: number | null;
    gain_margin_lower_dB: number | null;
    Ms: number;
    Ms_w_rad_s: number | null;
  };
  closed_loop: Record<
    string,
    { zeros: Pair[]; peak_dB: number; peak_w_rad_s: number; bandwidth_minus3dB_Hz: number | null }
  >;
  bode: Record<string, number>[];
}

describe('reference part 3, margins and frequency response', () => {
  const cases = reference<MarginsCase>('3_margins');
  const hertz = (w: number | null | undefined): number | null =>
    w === null || w === undefined ? null : w / (2 * Math.PI);

  test('every crossover, margin and Ms to 1e-6', () => {
    const agreement = new Agreement();
    for (const c of cases) {
      const m = margins(plantOf(c), gainsOf(c));
      const o = c.open_loop;
      const at = label(c);
      agreement.check(`${at} crossovers`, m.gainCrossovers.length, o.gain_crossovers.length, 0);
      o.gain_crossovers.forEach((g, i) => {
        const ours = m.gainCrossovers[i];
        agreement.check(`${at} ωc${i}`, ours?.frequencyHz, hertz(g.w_rad_s), 1e-6);
        agreement.check(`${at} φm${i}`, ours?.phaseMarginDeg, g.phase_margin_deg, 1e-6);
        agreement.check(`${at} delay${i}`, ours?.delayMargin, g.delay_margin_s, 1e-6);
      });
      agreement.check(`${at} phase margin`, m.phaseMarginDeg, o.phase_margin_deg, 1e-6);
      agreement.check(`${at} delay margin`, m.delayMargin, o.delay_margin_s, 1e-6);
      agreement.check(`${at} high`, m.gainMarginHighDb, o.gain_margin_upper_dB, 1e-6);
      agreement.check(`${at} low`, m.gainMarginLowDb, o.gain_margin_lower_dB, 1e-6);
      agreement.check(`${at} ω180`, m.phaseCrossoverHz, hertz(o.phase_crossovers[0]?.w_rad_s), 1e-6);
      agreement.check(`${at} Ms`, m.maxSensitivity, o.Ms, 1e-6);
      agreement.check(`${at} ωMs`, m.maxSensitivityHz, hertz(o.Ms_w_rad_s), 1e-6);
    }
    expect(agreement.found).toEqual([]);
    expect(agreement.compared).toBeGreaterThan(39 * 10);
  });

  test('zeros, peak and bandwidth of every structure to 1e-6', () => {
    const agreement = new Agreement();
    for (const c of cases)
      for (const structure of structures) {
        const ours = closedLoop(plantOf(c), gainsOf(c), structure);
        const theirs = c.closed_loop[structure]!;
        const at = `${label(c)} ${structure}`;
        agreement.check(`${at} zeros`, setDistance(ours.zeros, theirs.zeros, magnitude), 0, 0, 1e-7);
        agreement.check(`${at} peak`, ours.peakDb, theirs.peak_dB, 1e-6, 1e-9);
        agreement.check(`${at} ωpeak`, ours.peakHz, hertz(theirs.peak_w_rad_s), 1e-6);
        agreement.check(`${at} bandwidth`, ours.bandwidthHz, theirs.bandwidth_minus3dB_Hz, 1e-6);
      }
    expect(agreement.found).toEqual([]);
    expect(agreement.compared).toBe(39 * 3 * 4);
  });

  test('Bode points to 1e-6', () => {
    const agreement = new Agreement();
    for (const c of cases) {
      const frequencies = c.bode.map((b) => b.w_rad_s! / (2 * Math.PI));
      for (const structure of structures) {
        const ours = frequencyResponse(plantOf(c), gainsOf(c), structure, frequencies);
        c.bode.forEach((b, i) => {
          const at = `${label(c)} ${structure} ${b.w_rad_s}`;
          agreement.check(`${at} |L|`, ours.openLoop.magnitudeDb[i], b.L_dB!, 1e-6, 1e-7);
          agreement.check(`${at} arg L`, ours.openLoop.phaseDeg[i], b.L_phase_deg!, 1e-6, 1e-7);
          agreement.check(`${at} |T|`, ours.closedLoop.magnitudeDb[i], b[`${structure}_dB`]!, 1e-6, 1e-7);
          const phase = b[`${structure}_phase_deg_principal`]!;
          agreement.check(`${at} arg T`, ours.closedLoop.phaseDeg[i], phase, 1e-6, 1e-7);
        });
      }
    }
    expect(agreement.found).toEqual([]);
    expect(agreement.compared).toBe(39 * 3 * 12 * 4);
  });
});

type StepCase = Design & Record<string, Record<string, number | null>>;

test('reference part 4, step and steady-state error figures to 1e-5', () => {
  const agreement = new Agreement();
  for (const c of reference<StepCase>('4_step_linear'))
    for (const structure of structures) {
      const theirs = c[structure]!;
      const at = `${label(c)} ${structure}`;
      const plant = plantOf(c);
      const ours = stepFigures(plant, gainsOf(c), structure);
      agreement.check(`${at} overshoot`, ours.overshootPct, theirs.overshoot_pct!, 1e-5);
      agreement.check(`${at} peak time`, ours.peakTime, theirs.peak_time_s!, 1e-5);
      agreement.check(`${at} undershoot`, ours.undershootPct, theirs.undershoot_pct!, 1e-5);
      agreement.check(`${at} rise`, ours.riseTime, theirs.rise_10_90_s!, 1e-5);
      agreement.check(`${at} settling`, ours.settlingTime, theirs.settling_2pct_s!, 1e-5);
      const errors = steadyErrors(plant, gainsOf(c), structure);
      agreement.check(`${at} ramp`, errors.ramp, theirs.ess_unit_ramp!, 1e-5);
      agreement.check(`${at} acceleration`, errors.acceleration, theirs.ess_unit_parabola!, 1e-5);
      const forward = { ...gainsOf(c), kv: 1 / c.K, ka: 1 / (c.K * c.a) };
      const less = steadyErrors(plant, forward, structure);
      agreement.check(`${at} ramp with Kv`, less.ramp, theirs.ess_unit_ramp_with_FF!, 1e-5);
      agreement.check(
        `${at} acc. with Kv`,
        less.acceleration,
        theirs.ess_unit_parabola_with_FF!,
        1e-5,
        1e-15,
      );
    }
  expect(agreement.found).toEqual([]);
  expect(agreement.compared).toBe(39 * 3 * 9);
});
