import { Axis } from './axis.js';
import type { Gains, Structure } from './controller.js';
import { TARNWICK_AXES } from './tarnwick.js';
import type { TarnwickAxis } from './tarnwick/tarnwick-axis.js';

/**
 * Gains for a triple real pole −λ on a plant Kα/(s(s + α)): Kp = 3λ²/(Kα), Ki = λ³/(Kα), Kd = (3λ − α)/(Kα);
 * feed-forward Kv = 1/K (PI-D: 1/K + Kd), Ka = 1/(Kα).
 */
export function triplePoleGains(
  { gain, pole }: { gain: number; pole: number },
  lambda: number,
  structure: Structure,
  feedForward: boolean,
): Gains {
  const force = gain * pole;
  const kd = (3 * lambda - pole) / force;
  return {
    kp: (3 * lambda ** 2) / force,
    ki: lambda ** 3 / force,
    kd,
    kv: feedForward ? 1 / gain + (structure === 'PI-D' ? kd : 0) : 0,
    ka: feedForward ? 1 / force : 0,
  };
}

/** The axis of Tarnwick with a tag. */
export function tarnwickAxis(tag: string): TarnwickAxis {
  const found = TARNWICK_AXES.find((axis) => axis.tag === tag);
  if (!found) throw new Error(`no axis ${tag}`);
  return found;
}

/** The gains that its commissioning sheet asks for. */
export function sheetGains({ baseline, lambda, structure, feedForward }: TarnwickAxis): Gains {
  return triplePoleGains(baseline, lambda, structure, feedForward);
}

/** An axis that runs with the gains of its sheet, revision 1. */
export function commissioned(make: TarnwickAxis, seed = 1): Axis {
  const axis = new Axis(make, seed);
  axis.start({ revision: 1, gains: sheetGains(make), structure: make.structure });
  return axis;
}
