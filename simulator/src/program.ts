import type { Target } from './controller.js';
import type { Random } from './random.js';

export type Profile = 'raised-cosine' | 'trapezoid';

/** One step of a production program: travel to a place, then stay there. */
export interface Step {
  /** mm */
  to: number;
  /** Duration of the travel, s. */
  in: number;
  profile: Profile;
  /** Time at rest afterwards, s. */
  dwell: number;
}

/** Share of a trapezoidal move's duration spent accelerating, and again braking. */
const RAMP = 0.25;
/** Dwells vary between these shares of what the program says: waiting for parts takes its own time. */
const DWELL_FROM = 0.85;
const DWELL_TO = 1.25;
/** Ends of travel vary by up to this share of the step's distance either way. */
const PLACE_SPREAD = 0.004;

/**
 * Position, velocity and acceleration of a move from 0 to 1 in unit time, at 0 ≤ s ≤ 1.
 *
 * - raised-cosine: r = (1 − cos πs)/2
 * - trapezoid: constant acceleration for a quarter, constant speed 4/3, the same back
 */
export function profileAt(profile: Profile, s: number): Target {
  if (profile === 'raised-cosine') {
    const c = Math.cos(Math.PI * s);
    return {
      position: (1 - c) / 2,
      velocity: (Math.PI / 2) * Math.sin(Math.PI * s),
      acceleration: (Math.PI ** 2 / 2) * c,
    };
  }
  const speed = 1 / (1 - RAMP);
  const acceleration = speed / RAMP;
  if (s < RAMP) return { position: (acceleration * s * s) / 2, velocity: acceleration * s, acceleration };
  if (s <= 1 - RAMP) return { position: speed * (s - RAMP / 2), velocity: speed, acceleration: 0 };
  const e = 1 - s;
  return {
    position: 1 - (acceleration * e * e) / 2,
    velocity: acceleration * e,
    acceleration: -acceleration,
  };
}

/**
 * Runs an axis's steps over and over, with small variations, one target per sample. It can be held at the end of a
 * move and released again.
 */
export class Program {
  /** Moves run at this multiple of their programmed speed. */
  speed = 1;
  private readonly target: Target;
  private next = 0;
  private from: number;
  private to: number;
  private profile: Profile = 'raised-cosine';
  /** Samples of the move under way and how many of them are done; none is under way when they are equal. */
  private length = 0;
  private done = 0;
  private rest: number;
  private dwell = 0;
  private held = false;

  /** @param sampleTime s */
  constructor(
    private readonly steps: readonly Step[],
    private readonly sampleTime: number,
    private readonly random: Random,
  ) {
    const home = steps.at(-1);
    if (!home) throw new RangeError('a program needs at least one step');
    this.from = home.to;
    this.to = home.to;
    this.target = { position: home.to, velocity: 0, acceleration: 0 };
    this.rest = Math.round((home.dwell * random.uniform()) / sampleTime) + 1;
  }

  /** Where the program begins and ends a round, mm. */
  get home(): number {
    return this.steps.at(-1)!.to;
  }

  /** Whether a move is under way. */
  get moving(): boolean {
    return this.done < this.length;
  }

  /** Ends the move under way and then stays at its end. */
  hold(): void {
    this.held = true;
  }

  /** Goes on with the next step. */
  release(): void {
    this.held = false;
  }

  /** The target of the next sample; the object is reused. */
  tick(): Target {
    const { target } = this;
    if (!this.moving) {
      if (this.held || this.rest > 0) {
        if (!this.held) this.rest--;
        return target;
      }
      this.begin();
    }
    this.done++;
    const seconds = this.length * this.sampleTime;
    const span = this.to - this.from;
    if (this.done >= this.length) {
      target.position = this.to;
      target.velocity = 0;
      target.acceleration = 0;
      this.rest = Math.round(this.dwell / this.sampleTime);
      return target;
    }
    const at = profileAt(this.profile, this.done / this.length);
    target.position = this.from + span * at.position;
    target.velocity = (span * at.velocity) / seconds;
    target.acceleration = (span * at.acceleration) / (seconds * seconds);
    return target;
  }

  private begin(): void {
    const step = this.steps[this.next]!;
    this.next = (this.next + 1) % this.steps.length;
    this.from = this.to;
    const spread = PLACE_SPREAD * Math.abs(step.to - this.from);
    this.to = step.to + spread * (2 * this.random.uniform() - 1);
    this.profile = step.profile;
    this.length = Math.max(2, Math.round(step.in / this.speed / this.sampleTime));
    this.done = 0;
    this.dwell = step.dwell * (DWELL_FROM + (DWELL_TO - DWELL_FROM) * this.random.uniform());
  }
}
