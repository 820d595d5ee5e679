import { type Plant, checkPlant, requireFinite, requirePositive, UnphysicalInputError } from './plant.js';
import type { Polynomial } from './polynomial.js';

/**
 * Where target and position enter the controller, as set-point weights β (proportional) and γ (derivative)
 * of Åström & Hägglund, Advanced PID Control: PID β = γ = 1; PI-D β = 1, γ = 0; I-PD β = γ = 0.
 */
export type Structure = 'PID' | 'PI-D' | 'I-PD';
export const STRUCTURES: readonly Structure[] = ['PID', 'PI-D', 'I-PD'];

/** Set-point weights of a structure. */
export function setPointWeights(structure: Structure): { beta: 0 | 1; gamma: 0 | 1 } {
  return { beta: structure === 'I-PD' ? 0 : 1, gamma: structure === 'PID' ? 1 : 0 };
}

/** Three closed-loop poles; all magnitudes in rad/s, positive for a stable pole. */
export type PolePattern =
  | { kind: 'triple'; lambda: number }
  | { kind: 'real'; poles: readonly [number, number, number] }
  | { kind: 'pair'; pole: number; zeta: number; omega: number }
  | { kind: 'butterworth'; omega: number }
  | { kind: 'itae'; omega: number }
  | { kind: 'bessel'; omega: number };

/**
 * u = Kp(βr − y) + Ki∫(r − y)dt + Kd d/dt(γr − y) + Kv r' + Ka r''.
 * Kp %/mm, Ki %/(mm·s), Kd %·s/mm, Kv %·s/mm, Ka %·s²/mm.
 */
export interface Gains {
  kp: number;
  ki: number;
  kd: number;
  kv: number;
  ka: number;
}

/** Throws `UnphysicalInputError` for a pattern with a pole that is not stable, naming the field. */
export function checkPattern(pattern: PolePattern): void {
  switch (pattern.kind) {
    case 'triple':
      return requirePositive('pattern.lambda', pattern.lambda);
    case 'real':
      if (pattern.poles.length !== 3)
        throw new UnphysicalInputError('pattern.poles', 'must be three numbers');
      return pattern.poles.forEach((p, i) => requirePositive(`pattern.poles.${i}`, p));
    case 'pair':
      requirePositive('pattern.pole', pattern.pole);
      requirePositive('pattern.zeta', pattern.zeta);
      return requirePositive('pattern.omega', pattern.omega);
    default:
      return requirePositive('pattern.omega', pattern.omega);
  }
}

/** Throws `UnphysicalInputError` for gains that are not finite numbers. */
export function checkGains(gains: Gains): void {
  for (const name of ['kp', 'ki', 'kd', 'kv', 'ka'] as const) requireFinite(`gains.${name}`, gains[name]);
}

/**
 * s³ + d₂s² + d₁s + d₀ of a pattern, coefficients by ascending power.
 *
 * - triple: (s + λ)³
 * - real: (s + p₁)(s + p₂)(s + p₃)
 * - pair: (s + p)(s² + 2ζωs + ω²)
 * - butterworth: s³ + 2ωs² + 2ω²s + ω³ (Butterworth 1930)
 * - itae: s³ + 1.75ωs² + 2.15ω²s + ω³ (Graham & Lathrop 1953)
 * - bessel: the reverse Bessel polynomial s³ + 6s² + 15s + 15 (Thomson 1949) with s scaled by 15^(1/3)/ω,
 *   so that d₀ = ω³ as for the other two; the scaling is ours.
 */
export function patternPolynomial(pattern: PolePattern): Polynomial {
  switch (pattern.kind) {
    case 'triple': {
      const l = pattern.lambda;
      return [l * l * l, 3 * l * l, 3 * l, 1];
    }
    case 'real': {
      const [p1, p2, p3] = pattern.poles;
      return [p1 * p2 * p3, p1 * p2 + p1 * p3 + p2 * p3, p1 + p2 + p3, 1];
    }
    case 'pair': {
      const { pole, zeta, omega } = pattern;
      const damping = 2 * zeta * omega;
      return [pole * omega * omega, omega * omega + damping * pole, damping + pole, 1];
    }
    case 'butterworth':
      return normalised(pattern.omega, 2, 2);
    case 'itae':
      return normalised(pattern.omega, 2.15, 1.75);
    case 'bessel': {
      const unit = Math.cbrt(15);
      return normalised(pattern.omega, 15 / (unit * unit), 6 / unit);
    }
  }
}

function normalised(omega: number, c1: number, c2: number): Polynomial {
  return [omega * omega * omega, c1 * omega * omega, c2 * omega, 1];
}

/**
 * λ of a pattern, rad/s: the geometric mean of its three pole magnitudes, d₀^(1/3). It is λ itself for the
 * triple pole and ω for the normalised polynomials, and scales with `scalePattern`.
 */
export function patternFrequency(pattern: PolePattern): number {
  switch (pattern.kind) {
    case 'triple':
      return pattern.lambda;
    case 'real':
      return Math.cbrt(pattern.poles[0] * pattern.poles[1] * pattern.poles[2]);
    case 'pair':
      return Math.cbrt(pattern.pole * pattern.omega * pattern.omega);
    default:
      return pattern.omega;
  }
}

/** The same pattern with every pole multiplied by `factor` > 0 (a faster or slower copy of itself). */
export function scalePattern(pattern: PolePattern, factor: number): PolePattern {
  requirePositive('factor', factor);
  switch (pattern.kind) {
    case 'triple':
      return { kind: 'triple', lambda: pattern.lambda * factor };
    case 'real': {
      const [p1, p2, p3] = pattern.poles;
      return { kind: 'real', poles: [p1 * factor, p2 * factor, p3 * factor] };
    }
    case 'pair':
      return { ...pattern, pole: pattern.pole * factor, omega: pattern.omega * factor };
    default:
      return { kind: pattern.kind, omega: pattern.omega * factor };
  }
}

/** The same pattern moved to λ rad/s in the sense of `patternFrequency`. */
export function patternAt(pattern: PolePattern, lambda: number): PolePattern {
  return scalePattern(pattern, lambda / patternFrequency(pattern));
}

/**
 * Smallest damping ratio among the pattern's poles: 1 for real poles.
 * Butterworth ½; the cubics' pairs follow from their one real pole r: ζ = (d₂ − r)/2 · √(r/d₀).
 */
export function patternDamping(pattern: PolePattern): number {
  switch (pattern.kind) {
    case 'triple':
    case 'real':
      return 1;
    case 'pair':
      return Math.min(1, pattern.zeta);
    case 'butterworth':
      return 0.5;
    case 'itae':
    case 'bessel': {
      const [d0 = 0, d1 = 0, d2 = 0] = patternPolynomial({ kind: pattern.kind, omega: 1 });
      let r = 0.8;
      for (let i = 0; i < 50; i++) {
        const value = ((d2 - r) * r - d1) * r + d0;
        r += value / (3 * r * r - 2 * d2 * r + d1);
      }
      return ((d2 - r) / 2) * Math.sqrt(r / d0);
    }
  }
}

/**
 * Full feed-forward for a structure: Ka = 1/(Kα); Kv = 1/K, to which PI-D adds Kd because its derivative
 * acts on the position alone. Exact for PID and PI-D (T = 1); for I-PD the ramp error Kp/Ki stays.
 */
export function fullFeedForward(
  plant: Pick<Plant, 'gain' | 'pole'>,
  structure: Structure,
  kd: number,
): { kv: number; ka: number } {
  return {
    kv: 1 / plant.gain + (structure === 'PI-D' ? kd : 0),
    ka: 1 / (plant.gain * plant.pole),
  };
}

/**
 * Gains that put the closed-loop poles on the pattern.
 *
 * Δ(s) = s³ + (α + KαKd)s² + KαKp s + KαKi is matched with s³ + d₂s² + d₁s + d₀:
 *
 *     Kd = (d₂ − α)/(Kα),   Kp = d₁/(Kα),   Ki = d₀/(Kα)
 *
 * The same for all three structures, which differ in their zeros only. Kd is negative when the pole sum is
 * below α (λ < α/3 for a triple pole) and exactly 0 when the two agree to rounding. Dead time, friction and
 * bias do not enter. Kv = Ka = 0 unless `feedForward`.
 *
 * @throws UnphysicalInputError for a plant or a pattern that is not physical
 */
export function placeGains(
  plant: Plant,
  structure: Structure,
  pattern: PolePattern,
  feedForward: boolean,
): Gains {
  checkPlant(plant);
  checkPattern(pattern);
  const [d0 = 0, d1 = 0, d2 = 0] = patternPolynomial(pattern);
  const b = plant.gain * plant.pole;
  const excess = d2 - plant.pole;
  const kd = Math.abs(excess) <= 4 * Number.EPSILON * plant.pole ? 0 : excess / b;
  const { kv, ka } = feedForward ? fullFeedForward(plant, structure, kd) : { kv: 0, ka: 0 };
  return { kp: d1 / b, ki: d0 / b, kd, kv, ka };
}
