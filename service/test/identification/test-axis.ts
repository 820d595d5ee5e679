/**
 * A small machine for the identification tests, from Newton's law and independent of the code under test:
 * M v' = g·u(t − τ) − B·v − F·sgn v − o, stuck while |g·u − o| ≤ F_s; every interval between output changes
 * and velocity zeros is integrated in closed form. A sampled PI-D controller with feed-forward drives it
 * through production moves with dwells.
 */

/** Seeded uniform numbers (Marsaglia's xorshift32, Journal of Statistical Software 2003). */
export function randomSource(seed: number): () => number {
  let x = (Math.imul(seed, 2654435761) ^ 0x9e3779b9) | 0 || 1;
  const next = (): number => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x >>> 0) / 4294967296;
  };
  for (let i = 0; i < 10; i++) next();
  return next;
}

export interface AxisPhysics {
  /** kg or kg·m² as a unit of its own; only ratios matter. */
  mass: number;
  viscous: number;
  /** Dry friction while moving and while stuck, N. */
  coulomb: number;
  stiction: number;
  /** N per % of output, by direction of travel. */
  forceForward: number;
  forceReverse: number;
  offset: number;
  deadTime: number;
}

/** Physics with the given K, α, f, b (and K⁻ when it differs). */
export function physicsOf(p: {
  gain: number;
  pole: number;
  coulomb?: number;
  stiction?: number;
  bias?: number;
  deadTime?: number;
  gainReverse?: number;
}): AxisPhysics {
  const mass = 100;
  const viscous = mass * p.pole;
  const force = p.gain * viscous;
  return {
    mass,
    viscous,
    coulomb: (p.coulomb ?? 0) * force,
    stiction: (p.stiction ?? p.coulomb ?? 0) * force,
    forceForward: force,
    forceReverse: (p.gainReverse ?? p.gain) * viscous,
    offset: (p.bias ?? 0) * force,
    deadTime: p.deadTime ?? 0,
  };
}

export interface AxisSetup {
  physics: AxisPhysics;
  /** What the controller was designed for. */
  designGain: number;
  designPole: number;
  lambda: number;
  sampleTime: number;
  resolution: number;
  noise: number;
  feedForward: boolean;
  /** Largest distance mm and speed mm/s of the moves; share of the time at rest. */
  distance: number;
  speed: number;
  dwell: number;
  seed: number;
  outputDelaySamples?: number;
}

export interface AxisRecord {
  sampleTime: number;
  resolution: number;
  position: Int32Array;
  output: Int16Array;
  target: Float64Array;
}

/** The machine and its controller; `run` continues where the last run ended. */
export class TestAxis {
  physics: AxisPhysics;
  private y = 0;
  private v = 0;
  private readonly random: () => number;
  private readonly history: number[] = [];
  private integral = 0;
  private lastY = 0;
  private start = 0;
  private goal = 0;
  private moveTime = 0;
  private moveLength = 1;
  private trapezoid = false;
  private dwellLeft = 0.5;
  private started = false;

  constructor(readonly setup: AxisSetup) {
    this.physics = { ...setup.physics };
    this.random = randomSource(setup.seed);
  }

  private gauss(): number {
    return Math.sqrt(-2 * Math.log(1 - this.random())) * Math.cos(2 * Math.PI * this.random());
  }

  run(seconds: number): AxisRecord {
    const { sampleTime: T, resolution: q, lambda } = this.setup;
    const ka = this.setup.designGain * this.setup.designPole;
    const kp = (3 * lambda * lambda) / ka;
    const ki = lambda ** 3 / ka;
    const kd = (3 * lambda - this.setup.designPole) / ka;
    const kv = this.setup.feedForward ? 1 / this.setup.designGain + kd : 0;
    const kAcc = this.setup.feedForward ? 1 / ka : 0;
    const n = Math.round(seconds / T);
    const position = new Int32Array(n);
    const output = new Int16Array(n);
    const target = new Float64Array(n);
    for (let k = 0; k < n; k++) {
      const [r, rd, rdd] = this.targetAt(T);
      const measured = Math.round((this.y + this.setup.noise * this.gauss()) / q);
      const y = measured * q;
      if (!this.started) {
        this.lastY = y;
        this.started = true;
      }
      const pd = kp * (r - y) - (kd * (y - this.lastY)) / T + kv * rd + kAcc * rdd;
      this.integral = Math.min(Math.max(this.integral + ki * T * (r - y), -100 - pd), 100 - pd);
      const u = Math.round(Math.min(Math.max(pd + this.integral, -100), 100) * 100);
      this.lastY = y;
      position[k] = measured;
      output[k] = u;
      target[k] = r;
      this.advance(u / 100, T);
    }
    return { sampleTime: T, resolution: q, position, output, target };
  }

  /** Raised-cosine and trapezoidal moves of varied distance and speed, with dwells. */
  private targetAt(T: number): [number, number, number] {
    if (this.dwellLeft > 0) {
      this.dwellLeft -= T;
      if (this.dwellLeft <= 0) {
        const { distance, speed } = this.setup;
        this.start = this.goal;
        const far = distance * (0.3 + 0.7 * this.random());
        this.goal = this.start > distance / 2 ? Math.max(this.start - far, 0) : this.start + far;
        const length = Math.abs(this.goal - this.start);
        this.moveLength = Math.max(length / (speed * (0.3 + 0.35 * this.random())), 0.1);
        this.trapezoid = this.random() < 0.5;
        this.moveTime = 0;
      }
      return [this.goal === this.start || this.dwellLeft > 0 ? this.goal : this.start, 0, 0];
    }
    this.moveTime += T;
    const s = this.moveTime / this.moveLength;
    const d = this.goal - this.start;
    if (s >= 1) {
      this.dwellLeft = this.setup.dwell * (0.5 + this.random());
      return [this.goal, 0, 0];
    }
    const L = this.moveLength;
    if (this.trapezoid) {
      const top = 1 / (1 - 0.25);
      if (s < 0.25) return [this.start + d * 2 * top * s * s, (d * 4 * top * s) / L, (d * 4 * top) / (L * L)];
      if (s < 0.75) return [this.start + d * (top * (s - 0.125)), (d * top) / L, 0];
      const e = 1 - s;
      return [this.goal - d * 2 * top * e * e, (d * 4 * top * e) / L, (-d * 4 * top) / (L * L)];
    }
    const w = 2 * Math.PI;
    return [
      this.start + d * (s - Math.sin(w * s) / w),
      (d * (1 - Math.cos(w * s))) / L,
      (d * w * Math.sin(w * s)) / (L * L),
    ];
  }

  private advance(u: number, T: number): void {
    this.history.push(u);
    const total = this.physics.deadTime + (this.setup.outputDelaySamples ?? 0) * T;
    const whole = Math.floor(total / T + 1e-9);
    const part = Math.max(total - whole * T, 0);
    const at = (back: number): number => this.history[this.history.length - 1 - back] ?? 0;
    if (part > 0) this.drive(at(whole + 1), part);
    this.drive(at(whole), T - part);
    if (this.history.length > 4096) this.history.splice(0, 2048);
  }

  /** One stretch of constant output, in closed form between zeros of the velocity. */
  private drive(u: number, time: number): void {
    const p = this.physics;
    const alpha = p.viscous / p.mass;
    let left = time;
    for (let guard = 0; left > 1e-15 && guard < 20; guard++) {
      let sign = Math.sign(this.v);
      if (sign === 0) {
        const push = (u > 0 ? p.forceForward : p.forceReverse) * u - p.offset;
        if (Math.abs(push) <= p.stiction) return;
        sign = Math.sign(push);
      }
      const force = (sign > 0 ? p.forceForward : p.forceReverse) * u - p.offset - p.coulomb * sign;
      const vInf = force / p.viscous;
      let step = left;
      if (this.v !== 0 && Math.sign(vInf) !== sign && vInf !== 0) {
        const zero = Math.log((this.v - vInf) / -vInf) / alpha;
        if (zero < left) step = zero;
      }
      const e = Math.exp(-alpha * step);
      this.y += vInf * step + ((this.v - vInf) * (1 - e)) / alpha;
      this.v = step < left ? 0 : vInf + (this.v - vInf) * e;
      left -= step;
    }
  }
}

/** A random but plausible axis. */
export function randomAxis(
  seed: number,
  changes: Partial<AxisSetup> = {},
): { setup: AxisSetup; gain: number; pole: number; coulomb: number; bias: number; deadTime: number } {
  const r = randomSource(seed * 7919 + 13);
  const pole = 4 * (120 / 4) ** r();
  const gain = 4 + 14 * r();
  const coulomb = 0.5 + 3 * r();
  const bias = -0.8 + 1.6 * r();
  const sampleTime = r() < 0.5 ? 0.001 : 0.002;
  const deadTime = r() < 0.5 ? 0 : sampleTime * 2 * r();
  const resolution = [0.001, 0.002, 0.005, 0.01][Math.floor(4 * r())]!;
  return {
    gain,
    pole,
    coulomb,
    bias,
    deadTime,
    setup: {
      physics: physicsOf({ gain, pole, coulomb, stiction: coulomb * 1.15, bias, deadTime }),
      designGain: gain * (0.98 + 0.04 * r()),
      designPole: pole * (0.97 + 0.06 * r()),
      lambda: Math.min(Math.max(pole * 0.5, 22), 60),
      sampleTime,
      resolution,
      noise: resolution * 0.3,
      feedForward: true,
      distance: 250,
      speed: Math.min(gain * 60, 600),
      dwell: 0.6,
      seed,
      ...changes,
    },
  };
}
