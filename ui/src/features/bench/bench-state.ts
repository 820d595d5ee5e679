import type { Schemas } from '../../api/client';
import type { Axis } from '../fleet/fleet-api';

export const STRUCTURES = ['PID', 'PI-D', 'I-PD'] as const;
export const KINDS = {
  triple: 'triple real pole',
  real: 'three real poles',
  pair: 'real pole and a pair',
  butterworth: 'Butterworth',
  itae: 'ITAE',
  bessel: 'Bessel',
} as const;
export type Kind = keyof typeof KINDS;

/** Everything that is chosen on the bench; a link holds it all. */
export interface BenchState {
  /** Frequency scale of the pattern, rad/s. */
  lambda: number;
  kind: Kind;
  /** Three real poles: λ/spread, λ, λ·spread. */
  spread: number;
  /** A pair: its damping. */
  zeta: number;
  structure: (typeof STRUCTURES)[number];
  feedForward: boolean;
  plant: 'identified' | 'baseline';
  profile: 'move' | 'step';
  /** Step, mm. */
  step: number;
}

/** The bench as the axis runs now. */
export function benchStart(axis: Axis): BenchState {
  const { pattern } = axis;
  const poles = [...(pattern.poles ?? [])].sort((a, b) => a - b);
  return {
    lambda: axis.lambda,
    kind: pattern.kind,
    spread: poles.length === 3 ? Number(Math.sqrt(poles[2]! / poles[0]!).toFixed(3)) : 1.5,
    zeta: pattern.zeta ?? 0.7,
    structure: axis.structure,
    feedForward: axis.feedForward,
    plant: axis.estimate ? 'identified' : 'baseline',
    profile: 'move',
    step: Number((Math.abs(axis.move.distance) / 100).toPrecision(1)),
  };
}

/** The start with what a link says; what it says wrongly is left as it was. */
export function readBench(start: BenchState, search: URLSearchParams): BenchState {
  const number = (name: string, low: number, high: number, otherwise: number): number => {
    const value = Number(search.get(name) ?? NaN);
    return value >= low && value <= high ? value : otherwise;
  };
  const one = <T extends string>(name: string, of: readonly T[], otherwise: T): T =>
    of.find((value) => value === search.get(name)) ?? otherwise;
  return {
    lambda: number('lambda', 0.01, 1e4, start.lambda),
    kind: one('poles', Object.keys(KINDS) as Kind[], start.kind),
    spread: number('spread', 1, 10, start.spread),
    zeta: number('zeta', 0.05, 2, start.zeta),
    structure: one('structure', STRUCTURES, start.structure),
    feedForward: search.has('ff') ? search.get('ff') === '1' : start.feedForward,
    plant: one('plant', ['identified', 'baseline'], start.plant),
    profile: one('profile', ['move', 'step'], start.profile),
    step: number('step', 1e-3, 1e4, start.step),
  };
}

/** The state as a link holds it. */
export function writeBench(state: BenchState): URLSearchParams {
  return new URLSearchParams({
    lambda: String(Number(state.lambda.toPrecision(5))),
    poles: state.kind,
    ...(state.kind === 'real' && { spread: String(state.spread) }),
    ...(state.kind === 'pair' && { zeta: String(state.zeta) }),
    structure: state.structure,
    ff: state.feedForward ? '1' : '0',
    plant: state.plant,
    profile: state.profile,
    ...(state.profile === 'step' && { step: String(state.step) }),
  });
}

/** The poles that are asked for, as the service takes them. */
export function patternOf({ kind, lambda, spread, zeta }: BenchState): Schemas['PatternDto'] {
  switch (kind) {
    case 'triple':
      return { kind, lambda };
    case 'real':
      return { kind, poles: [lambda / spread, lambda, lambda * spread] };
    case 'pair':
      return { kind, pole: lambda, zeta, omega: lambda };
    default:
      return { kind, omega: lambda };
  }
}
