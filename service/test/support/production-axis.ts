import type { Gains } from '../../src/control/pole-placement.js';
import type { FrameBlock } from '../../src/telemetry/frame-codec.js';

/** Steps of the physics within one sample. */
const SUBSTEPS = 10;
/** The moves, again and again: from, to in mm, and time in s; a stand between them. */
const PROGRAM = [
  { from: 0, to: 250, time: 0.9 },
  { from: 250, to: 100, time: 0.6 },
  { from: 100, to: 0, time: 0.45 },
];
const STAND = 0.4;

/**
 * A machine with a sampled PI-D controller and its production: M v' = g·u − B·v − F·sgn v, by steps of a tenth of a
 * sample, with a Coulomb friction that sticks; raised-cosine moves of three kinds with stands between. It knows no
 * more of the code under test than the names of the gains.
 */
export class ProductionAxis {
  /** Times the commissioned mass. */
  load = 1;
  /** Times the viscous drag, and times the actuating force, of the machine as it was commissioned. */
  drag = 1;
  strength = 1;
  gains: Gains;
  private readonly viscous: number;
  private readonly force: number;
  private readonly friction: number;
  private y = 0;
  private v = 0;
  private integral = 0;
  private lastY = 0;
  private step = 0;
  /** s since the move or its stand began */
  private clock = 0;

  /** K, α and f of the unloaded machine, in the units of the contract; µs per sample; mm per count. */
  constructor(
    private readonly plant: { gain: number; pole: number; coulomb: number },
    gains: Gains,
    private readonly stepUs: number,
    private readonly resolution: number,
  ) {
    this.viscous = plant.pole; // of a mass of 1
    this.force = plant.gain * this.viscous;
    this.friction = plant.coulomb * this.force;
    this.gains = gains;
  }

  /** Other gains at rest, without a bump. */
  take(gains: Gains): void {
    this.gains = gains;
  }

  /** So many seconds of production, or of standing where the axis is at the end of its move. */
  run(startUs: number, seconds: number, production = true): FrameBlock {
    const n = Math.round((seconds * 1e6) / this.stepUs);
    const T = this.stepUs / 1e6;
    const q = this.resolution;
    const target = new Int32Array(n);
    const position = new Int32Array(n);
    const output = new Int16Array(n);
    for (let k = 0; k < n; k++) {
      const { r, speed, acceleration } = this.target(T, production);
      const counts = Math.round(this.y / q);
      const measured = counts * q;
      const { kp, ki, kd, kv, ka } = this.gains;
      const error = r - measured;
      const rest = kp * error - (kd * (measured - this.lastY)) / T + kv * speed + ka * acceleration;
      this.integral = Math.min(Math.max(this.integral + ki * T * error, -100 - rest), 100 - rest);
      const u = Math.round(100 * Math.min(Math.max(rest + this.integral, -100), 100));
      this.lastY = measured;
      target[k] = Math.round(r / q);
      position[k] = counts;
      output[k] = u;
      this.advance(u / 100, T);
    }
    return {
      axisIndex: 0,
      motionEnabled: true,
      gapBefore: false,
      sampleTimeUs: this.stepUs,
      startUs,
      target,
      position,
      output,
    };
  }

  private target(T: number, production: boolean): { r: number; speed: number; acceleration: number } {
    const { from, to, time } = PROGRAM[this.step]!;
    this.clock += T;
    if (this.clock >= time) {
      if (production && this.clock >= time + STAND) {
        this.step = (this.step + 1) % PROGRAM.length;
        this.clock = 0;
      }
      return { r: to, speed: 0, acceleration: 0 };
    }
    const distance = to - from;
    const phase = (2 * Math.PI * this.clock) / time;
    return {
      r: from + distance * (this.clock / time - Math.sin(phase) / (2 * Math.PI)),
      speed: (distance / time) * (1 - Math.cos(phase)),
      acceleration: ((2 * Math.PI * distance) / time ** 2) * Math.sin(phase),
    };
  }

  private advance(u: number, T: number): void {
    const h = T / SUBSTEPS;
    for (let s = 0; s < SUBSTEPS; s++) {
      const push = this.strength * this.force * u - this.drag * this.viscous * this.v;
      if (this.v === 0 && Math.abs(push) <= this.friction) continue;
      const way = this.v !== 0 ? Math.sign(this.v) : Math.sign(push);
      const next = this.v + (h * (push - this.friction * way)) / this.load;
      const stops = this.v !== 0 && Math.sign(next) !== way;
      this.y += (h * (this.v + (stops ? 0 : next))) / 2;
      this.v = stops ? 0 : next;
    }
  }
}
