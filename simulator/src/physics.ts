/**
 * The moving part of an axis by Newton's law, knowing only mass, friction and force:
 *
 *     M v' = g·u(t − τ) − B·v − F·sgn(v) − o
 *
 * between two hard stops. What a control engineer calls K = g/B, α = B/M, f = F/g and b = o/g follows from it and
 * is used nowhere in the motion (see `plantOf`).
 */
export interface Physics {
  /** M, kg */
  mass: number;
  /** B, N·s/m */
  viscous: number;
  /** F, N: dry friction, the same sticking and sliding */
  coulomb: number;
  /** g for travel away from the origin, N per % of output */
  forceForward: number;
  /** g for travel towards the origin, N per % of output */
  forceReverse: number;
  /** o, N: weight, a shifted valve null … */
  offset: number;
  /** τ, s: from the output register to the force */
  deadTime: number;
}

/** An axis in the control engineer's terms, units as everywhere: K (mm/s)/%, α rad/s, f and b %, τ s. */
export interface PlantFigures {
  gain: number;
  gainForward: number;
  gainReverse: number;
  pole: number;
  coulomb: number;
  bias: number;
  deadTime: number;
}

const MM_PER_M = 1000;

/**
 * K = g/B, α = B/M, f = F/g, b = o/g. Where g differs by direction, K is the mean of both, and f and b are what
 * v' = −αv + K±·α(u − f·sgn(v) − b) needs: f ± b is the output that overcomes F ± o in either direction.
 */
export function plantOf(physics: Physics): PlantFigures {
  const { mass, viscous, coulomb, forceForward, forceReverse, offset, deadTime } = physics;
  const againstForward = (coulomb + offset) / forceForward;
  const againstReverse = (coulomb - offset) / forceReverse;
  return {
    gain: (MM_PER_M * (forceForward + forceReverse)) / 2 / viscous,
    gainForward: (MM_PER_M * forceForward) / viscous,
    gainReverse: (MM_PER_M * forceReverse) / viscous,
    pole: viscous / mass,
    coulomb: (againstForward + againstReverse) / 2,
    bias: (againstForward - againstReverse) / 2,
    deadTime,
  };
}

/** Velocity reversals that one hold can have: it stops, sticks or leaves again, and then its drive is constant. */
const MOST_PIECES = 8;

/**
 * A body that follows `Physics` exactly for outputs held over sample times.
 *
 * Over a stretch of constant force the velocity runs exponentially to its asymptote; it is followed in closed form
 * from one event (output change, velocity through zero, hard stop) to the next, so no integration step is involved.
 * At rest it stays while the drive is within ±F.
 */
export class Body {
  /** mm */
  position: number;
  /** mm/s */
  velocity = 0;
  private physics: Physics;
  /** Outputs of past ticks, newest at `head`, as long as the dead time needs. */
  private past: Float64Array;
  private head = 0;
  private whole = 0;
  private part = 0;

  /**
   * @param sampleTime s, of the output
   * @param travel hard stops, mm
   */
  constructor(
    physics: Physics,
    private readonly sampleTime: number,
    private readonly travel: { min: number; max: number },
    start: number,
  ) {
    this.physics = physics;
    this.position = start;
    this.past = new Float64Array(1);
    this.change(physics);
  }

  /** The machine changes while it runs; position, velocity and outputs under way stay. */
  change(physics: Physics): void {
    this.physics = physics;
    const samples = physics.deadTime / this.sampleTime;
    this.whole = Math.floor(samples + 1e-9);
    this.part = Math.max(samples - this.whole, 0) * this.sampleTime;
    if (this.part < 1e-12) this.part = 0;
    if (this.past.length < this.whole + 2) {
      const longer = new Float64Array(this.whole + 2);
      for (let i = 0; i < this.past.length; i++) longer[longer.length - 1 - i] = this.outputBefore(i);
      this.head = longer.length - 1;
      this.past = longer;
    }
  }

  private outputBefore(ticks: number): number {
    const { past } = this;
    return past[(this.head - ticks + past.length * 2) % past.length]!;
  }

  /** One sample time with a new output, %; it acts after the dead time, to the fraction of a sample. */
  advance(output: number): void {
    this.head = (this.head + 1) % this.past.length;
    this.past[this.head] = output;
    if (this.part > 0) this.hold(this.outputBefore(this.whole + 1), this.part);
    this.hold(this.outputBefore(this.whole), this.sampleTime - this.part);
  }

  /** Direction in which the body leaves rest under a drive, or 0 while it sticks. */
  private leaves(u: number): -1 | 0 | 1 {
    const { coulomb, forceForward, forceReverse, offset } = this.physics;
    if (forceForward * u - offset > coulomb) return this.position >= this.travel.max ? 0 : 1;
    if (forceReverse * u - offset < -coulomb) return this.position <= this.travel.min ? 0 : -1;
    return 0;
  }

  private hold(u: number, duration: number): void {
    const { mass, viscous, coulomb, forceForward, forceReverse, offset } = this.physics;
    const { min, max } = this.travel;
    const pole = viscous / mass;
    let left = duration;
    for (let piece = 0; left > 0 && piece < MOST_PIECES; piece++) {
      const v = this.velocity;
      const sign = v > 0 ? 1 : v < 0 ? -1 : this.leaves(u);
      if (sign === 0) return;
      const force = (sign > 0 ? forceForward : forceReverse) * u - offset - sign * coulomb;
      const asymptote = (MM_PER_M * force) / viscous;
      let time = left;
      let stops = false;
      if (v !== 0 && asymptote * sign < 0) {
        const toRest = Math.log1p(-v / asymptote) / pole;
        if (toRest <= left) {
          time = toRest;
          stops = true;
        }
      }
      const lost = -Math.expm1(-pole * time);
      const end = this.position + asymptote * time + ((v - asymptote) * lost) / pole;
      this.velocity = stops ? 0 : v + (asymptote - v) * lost;
      left = stops ? left - time : 0;
      if (end >= max || end <= min) {
        this.position = end >= max ? max : min;
        this.velocity = 0;
        return;
      }
      this.position = end;
    }
  }
}
