import {
  checkPlant,
  deadTimeInSamples,
  heldPositionShare,
  type HeldPlant,
  type Plant,
  requireFinite,
  requireNotNegative,
  requirePositive,
  UnphysicalInputError,
  zeroOrderHold,
} from './plant.js';
import { checkGains, type Gains, setPointWeights, type Structure } from './pole-placement.js';

/**
 * What keeps the integrator in range when the output is clamped.
 *
 * - `clamp`: I ← clamp(I + Ki·T·e, −U − (P+D+F), U − (P+D+F)); this also drags the integrator inward, so
 *   after a derivative kick the axis can run backwards.
 * - `conditional`: growth outward is stopped, the integrator is never dragged.
 */
export type AntiWindup = 'clamp' | 'conditional';

/** The controller as it runs in the machine. */
export interface Controller {
  /** T, s. */
  sampleTime: number;
  /** Whole samples between computing an output and applying it; 0 when absent. */
  outputDelaySamples?: number;
  /** Position resolution q, mm; 0 (continuous) when absent. */
  resolution?: number;
  /** Output limit U, %; 100 when absent. */
  outputLimit?: number;
  /** `clamp` when absent. */
  antiWindup?: AntiWindup;
}

/** A move from rest at 0: `distance` mm within `duration` s, then `settle` s (1 when absent) at rest. */
export interface Move {
  distance: number;
  duration: number;
  settle?: number;
  profile: 'raised-cosine' | 'step';
}

/** Most samples one simulated move may have: bounds the work of one request. */
export const MAX_MOVE_SAMPLES = 200_000;
/** Largest whole number of delay samples (output delay and dead time together). */
export const MAX_DELAY_SAMPLES = 1000;

/** Target position r (mm), velocity r' (mm/s) and acceleration r'' (mm/s²) at every tick. */
export interface Trajectory {
  target: Float64Array;
  velocity: Float64Array;
  acceleration: Float64Array;
}

/** What every tick of the simulated loop did; one entry per sample, taken before the plant advances. */
export interface LoopTrace {
  /** True position y, mm. */
  position: Float64Array;
  /** True velocity v, mm/s. */
  velocity: Float64Array;
  /** Output u after its clamp, %. */
  output: Float64Array;
  /** Integrator I after its update, %. */
  integrator: Float64Array;
}

/** Where a simulated loop starts. */
export interface LoopStart {
  /** Position at the first tick, mm; 0 when absent. */
  position?: number;
  /** Integrator and output before the first tick, %; 0 when absent. An axis that holds against a bias has it. */
  output?: number;
  /**
   * `at-rest-at-zero` (default): the derivative compares the first tick with error 0 and position 0, so a
   * step gives its full kick. `first-sample`: the first tick is compared with itself.
   */
  derivative?: 'at-rest-at-zero' | 'first-sample';
}

/** Figures of one move. */
export interface MoveFigures {
  /** max |r − y|, mm. */
  peakFollowingError: number;
  /** √mean (r − y)², mm. */
  rmsFollowingError: number;
  /** Share of samples with |u| ≥ 99.9 % of the limit, %. */
  saturatedPct: number;
  /** Furthest travel beyond the end point, mm; 0 when there is none. */
  overshoot: number;
  /** max |u|, %. */
  peakOutput: number;
}

export interface SimulatedMove extends MoveFigures {
  trajectory: Trajectory;
  trace: LoopTrace;
}

/** Share of the output limit from which a sample counts as saturated. */
export const SATURATED_FROM = 0.999;

/** Throws `UnphysicalInputError` for a controller that cannot run. */
export function checkController(controller: Controller): void {
  requirePositive('controller.sampleTime', controller.sampleTime);
  const delay = controller.outputDelaySamples ?? 0;
  if (!Number.isInteger(delay) || delay < 0 || delay > MAX_DELAY_SAMPLES)
    throw new UnphysicalInputError(
      'controller.outputDelaySamples',
      `must be a whole number from 0 to ${MAX_DELAY_SAMPLES}`,
    );
  requireNotNegative('controller.resolution', controller.resolution ?? 0);
  requirePositive('controller.outputLimit', controller.outputLimit ?? 100);
}

/** Samples of a move at a sample time: round((duration + settle)/T). */
export function moveSamples(move: Move, sampleTime: number): number {
  return Math.round((move.duration + (move.settle ?? 1)) / sampleTime);
}

/** Throws `UnphysicalInputError` for a move that is not physical or has more than `MAX_MOVE_SAMPLES`. */
export function checkMove(move: Move, sampleTime: number): void {
  requireFinite('move.distance', move.distance);
  requirePositive('move.duration', move.duration);
  requireNotNegative('move.settle', move.settle ?? 1);
  const samples = moveSamples(move, sampleTime);
  if (samples < 1)
    throw new UnphysicalInputError('move.duration', 'and settle together are shorter than one sample');
  if (samples > MAX_MOVE_SAMPLES)
    throw new UnphysicalInputError(
      'move.duration',
      `gives ${samples} samples at this sample time; at most ${MAX_MOVE_SAMPLES} are simulated`,
    );
}

/** Columns of n numbers in one allocation, which is what a short simulation would otherwise spend its time on. */
function columns(count: number, n: number): Float64Array[] {
  const block = new Float64Array(count * n);
  return Array.from({ length: count }, (_, i) => block.subarray(i * n, (i + 1) * n));
}

/**
 * Target of a move at every tick kT, k = 0 … N−1.
 *
 * Raised cosine: r = D/2·(1 − cos(πt/d)) with its exact derivatives for the first round(d/T) ticks, then at
 * rest at D. Step: r = D from the first tick, r' = r'' = 0.
 */
export function moveTrajectory(move: Move, sampleTime: number): Trajectory {
  checkMove(move, sampleTime);
  const n = moveSamples(move, sampleTime);
  const target = new Float64Array(n).fill(move.distance);
  const velocity = new Float64Array(n);
  const acceleration = new Float64Array(n);
  if (move.profile === 'raised-cosine') {
    const w = Math.PI / move.duration;
    const half = move.distance / 2;
    const moving = Math.min(n, Math.round(move.duration / sampleTime));
    for (let k = 0; k < moving; k++) {
      const angle = w * (k * sampleTime);
      const c = Math.cos(angle);
      target[k] = half * (1 - c);
      velocity[k] = half * w * Math.sin(angle);
      acceleration[k] = half * w * w * c;
    }
  }
  return { target, velocity, acceleration };
}

/**
 * Advances position and velocity exactly over one hold with a constant drive w = u − b against Coulomb friction
 * f (both %).
 *
 * While the axis moves, v' = −αv + Kα(w − f·sgn v) is linear and solved in closed form; v tends monotonically to
 * its asymptote, so it passes 0 within the hold only if its end value has changed sign. Then it comes to rest at
 * t* = ln(1 + |v|/(K(f − w·sgn v)))/α. At rest it sticks when |w| ≤ f and otherwise leaves in the direction of w;
 * since w is held, it cannot stop again. So at most two closed-form pieces make one exact step.
 */
function advance(
  state: { y: number; v: number },
  plant: Plant,
  friction: number,
  drive: number,
  hold: Hold,
): void {
  const { y, v } = state;
  let net = drive;
  if (friction !== 0) {
    if (v > 0) net = drive - friction;
    else if (v < 0) net = drive + friction;
    else if (drive > friction) net = drive - friction;
    else if (drive < -friction) net = drive + friction;
    else return;
  }
  const end = hold.decay * v + hold.velocityFromOutput * net;
  if (friction === 0 || v === 0 || end > 0 === v > 0) {
    state.y = y + hold.positionFromVelocity * v + hold.positionFromOutput * net;
    state.v = end;
    return;
  }
  // net opposes v: it stops after t*
  const stop = Math.min(hold.duration, Math.log1p(-v / (plant.gain * net)) / plant.pole);
  const x = plant.pole * stop;
  state.y = y + (-Math.expm1(-x) / plant.pole) * v + plant.gain * stop * heldPositionShare(x) * net;
  state.v = 0;
  const rest = hold.duration - stop;
  if (rest > 0 && Math.abs(drive) > friction)
    advance(state, plant, friction, drive, { ...zeroOrderHold(plant, rest), duration: rest });
}

type Hold = HeldPlant & { duration: number };

/**
 * The loop as a controller runs it, along any trajectory, with the plant advanced exactly between ticks.
 *
 * Each tick, with yq the position at the resolution (yq = q·⌊y/q + ½⌋, y itself for q = 0) and e = r − yq:
 *
 *     P = Kp(βr − yq),  D = Kd((γr − yq) − (γr − yq)₋₁)/T,  F = Kv r' + Ka r''
 *     I ← integrator law on I + Ki·T·e with the bounds ∓U − (P + D + F)      (see AntiWindup)
 *     u = clamp(P + I + D + F, ±U)
 *
 * u acts `outputDelaySamples` ticks and the plant's dead time later; a dead time that is not a whole number of
 * samples splits the hold where the input changes. Coulomb friction sticks and reverses inside a sample
 * exactly (see `advance`). Before the first tick the axis was at rest with the output of `start`.
 *
 * @throws UnphysicalInputError naming the field
 */
export function simulateLoop(
  plant: Plant,
  gains: Gains,
  structure: Structure,
  controller: Controller,
  trajectory: Trajectory,
  start: LoopStart = {},
): LoopTrace {
  checkPlant(plant);
  checkGains(gains);
  checkController(controller);
  const { target, velocity: targetVelocity, acceleration: targetAcceleration } = trajectory;
  const n = target.length;
  const [position, velocity, output, integrator] = columns(4, n) as [
    Float64Array,
    Float64Array,
    Float64Array,
    Float64Array,
  ];
  const T = controller.sampleTime;
  const { kp, ki, kd, kv, ka } = gains;
  const { beta, gamma } = setPointWeights(structure);
  const limit = controller.outputLimit ?? 100;
  const q = controller.resolution ?? 0;
  const conditional = controller.antiWindup === 'conditional';
  const friction = plant.coulomb ?? 0;
  const bias = plant.bias ?? 0;
  const late = deadTimeInSamples(plant.deadTime ?? 0, T);
  const delay = (controller.outputDelaySamples ?? 0) + late.whole;
  if (delay > MAX_DELAY_SAMPLES)
    throw new UnphysicalInputError('plant.deadTime', `is more than ${MAX_DELAY_SAMPLES} samples long`);
  const firstPart = late.fraction * T;
  const holdFirst: Hold = { ...zeroOrderHold(plant, firstPart), duration: firstPart };
  const holdRest: Hold = { ...zeroOrderHold(plant, T - firstPart), duration: T - firstPart };
  const state = { y: start.position ?? 0, v: 0 };
  let { y: trueY, v: trueV } = state;
  const plain = friction === 0 && firstPart === 0;
  const before = start.output ?? 0;
  let I = before;
  let previous = 0;

  for (let k = 0; k < n; k++) {
    const r = target[k]!;
    const y = q > 0 ? q * Math.floor(trueY / q + 0.5) : trueY;
    const e = r - y;
    const P = kp * (beta * r - y);
    const weighted = gamma * r - y;
    if (k === 0 && start.derivative === 'first-sample') previous = weighted;
    const D = (kd * (weighted - previous)) / T;
    previous = weighted;
    const F = kv * targetVelocity[k]! + ka * targetAcceleration[k]!;
    const low = -limit - (P + D + F);
    const high = limit - (P + D + F);
    const next = I + ki * T * e;
    I = conditional
      ? Math.max(Math.min(next, Math.max(I, high)), Math.min(I, low))
      : Math.min(Math.max(next, low), high);
    const u = Math.min(Math.max(P + I + D + F, -limit), limit);
    position[k] = trueY;
    velocity[k] = trueV;
    output[k] = u;
    integrator[k] = I;

    const drive = (k >= delay ? output[k - delay]! : before) - bias;
    if (plain) {
      const old = trueV;
      trueV = holdRest.decay * old + holdRest.velocityFromOutput * drive;
      trueY = trueY + holdRest.positionFromVelocity * old + holdRest.positionFromOutput * drive;
      continue;
    }
    state.y = trueY;
    state.v = trueV;
    if (firstPart > 0)
      advance(state, plant, friction, (k > delay ? output[k - delay - 1]! : before) - bias, holdFirst);
    advance(state, plant, friction, drive, holdRest);
    trueY = state.y;
    trueV = state.v;
  }
  return { position, velocity, output, integrator };
}

/** Figures of a simulated move towards `distance` from its target and trace; see `MoveFigures`. */
export function moveFigures(
  target: Float64Array,
  trace: LoopTrace,
  distance: number,
  outputLimit = 100,
): MoveFigures {
  const { position, output } = trace;
  const n = target.length;
  const direction = Math.sign(distance);
  const saturatedFrom = SATURATED_FROM * outputLimit;
  let peak = 0;
  let sum = 0;
  let saturated = 0;
  let beyond = 0;
  let peakOutput = 0;
  for (let k = 0; k < n; k++) {
    const y = position[k]!;
    const error = Math.abs(target[k]! - y);
    const u = Math.abs(output[k]!);
    if (error > peak) peak = error;
    sum += error * error;
    if (u >= saturatedFrom) saturated++;
    if (u > peakOutput) peakOutput = u;
    const over = direction * (y - distance);
    if (over > beyond) beyond = over;
  }
  return {
    peakFollowingError: peak,
    rmsFollowingError: Math.sqrt(sum / n),
    saturatedPct: (100 * saturated) / n,
    overshoot: beyond,
    peakOutput,
  };
}

/**
 * One move from rest (at 0 with no output unless `start` says otherwise) with the loop as it really runs (`simulateLoop`), and its figures.
 *
 * @throws UnphysicalInputError naming the field
 */
export function simulateMove(
  plant: Plant,
  gains: Gains,
  structure: Structure,
  controller: Controller,
  move: Move,
  start: LoopStart = {},
): SimulatedMove {
  checkController(controller);
  const trajectory = moveTrajectory(move, controller.sampleTime);
  const trace = simulateLoop(plant, gains, structure, controller, trajectory, start);
  return {
    ...moveFigures(trajectory.target, trace, move.distance, controller.outputLimit),
    trajectory,
    trace,
  };
}
