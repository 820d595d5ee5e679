import { readFileSync } from 'node:fs';
import type { Gains, PolePattern, Structure } from '../../src/control/pole-placement.js';

/** Reference numbers by GNU Octave 7.3, NumPy 1.24, SciPy 1.10 and mpmath 1.2; see ../references/README.md. */
export function reference<T>(name: string): T[] {
  const text = readFileSync(new URL(`../references/${name}.json`, import.meta.url), 'utf8');
  return (JSON.parse(text) as { cases: T[] }).cases;
}

export interface Design {
  id: string;
  pattern: 'triple' | 'real3' | 'complex';
  K: number;
  a: number;
  Kp: number;
  Ki: number;
  Kd: number;
}

export type Pair = [number, number];
export const structures: Structure[] = ['PID', 'PI-D', 'I-PD'];
export const label = (c: Design): string => `${c.id} ${c.pattern}`;
export const plantOf = (c: Design): { gain: number; pole: number } => ({ gain: c.K, pole: c.a });
export const gainsOf = (c: Design): Gains => ({ kp: c.Kp, ki: c.Ki, kd: c.Kd, kv: 0, ka: 0 });

export function patternOf(spec: {
  L?: number;
  p?: number | [number, number, number];
  zeta?: number;
  w?: number;
}): PolePattern {
  if (spec.L !== undefined) return { kind: 'triple', lambda: spec.L };
  if (Array.isArray(spec.p)) return { kind: 'real', poles: spec.p };
  return { kind: 'pair', pole: spec.p ?? NaN, zeta: spec.zeta ?? NaN, omega: spec.w ?? NaN };
}

/** |actual − expected| within `relative`·|expected| + `absolute`; null must be null. */
export function differs(
  actual: number | null | undefined,
  expected: number | null,
  relative: number,
  absolute = 0,
): string | null {
  if (expected === null || actual === null || actual === undefined)
    return expected === null && actual === null ? null : `${actual} instead of ${expected}`;
  return Math.abs(actual - expected) <= relative * Math.abs(expected) + absolute
    ? null
    : `${actual} instead of ${expected}, off by ${Math.abs(actual - expected)}`;
}

/** Collects every disagreement with its place, so that a failing test names all of them. */
export class Agreement {
  readonly found: string[] = [];
  compared = 0;

  check(
    place: string,
    actual: number | null | undefined,
    expected: number | null,
    relative: number,
    absolute = 0,
  ): void {
    this.compared++;
    const difference = differs(actual, expected, relative, absolute);
    if (difference) this.found.push(`${place}: ${difference}`);
  }
}

/** Largest distance of two sets of complex numbers matched greedily, relative to `scale`. */
export function setDistance(
  actual: readonly { re: number; im: number }[],
  expected: readonly Pair[],
  scale: (z: Pair) => number,
): number {
  if (actual.length !== expected.length) return Infinity;
  const open = actual.slice();
  let worst = 0;
  for (const e of expected) {
    let best = 0;
    open.forEach((z, i) => {
      const d = Math.hypot(z.re - e[0], z.im - e[1]);
      const b = open[best]!;
      if (d < Math.hypot(b.re - e[0], b.im - e[1])) best = i;
    });
    const z = open.splice(best, 1)[0]!;
    worst = Math.max(worst, Math.hypot(z.re - e[0], z.im - e[1]) / scale(e));
  }
  return worst;
}
