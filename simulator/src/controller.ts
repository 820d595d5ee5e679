export type Structure = 'PID' | 'PI-D' | 'I-PD';

/** Kp %/mm, Ki %/(mm·s), Kd %·s/mm, Kv %·s/mm, Ka %·s²/mm. */
export interface Gains {
  kp: number;
  ki: number;
  kd: number;
  kv: number;
  ka: number;
}

/** Where the axis should be: r mm, r' mm/s, r'' mm/s². */
export interface Target {
  position: number;
  velocity: number;
  acceleration: number;
}

const LIMIT = 100;
/** The output register counts in 0.01 %. */
const OUTPUT_STEPS = 100;

/** Gains as a controller's single-precision registers hold them. */
export function inRegisters(gains: Gains): Gains {
  return {
    kp: Math.fround(gains.kp),
    ki: Math.fround(gains.ki),
    kd: Math.fround(gains.kd),
    kv: Math.fround(gains.kv),
    ka: Math.fround(gains.ka),
  };
}

/**
 * The sampled position controller of a machine, u = Kp(βr − y) + Ki∫(r − y)dt + Kd d/dt(γr − y) + Kv r' + Ka r'':
 *
 *     P = Kp(βr − y),  D = Kd((γr − y) − (γr − y)₋₁)/T,  F = Kv r' + Ka r''
 *     I ← clamp(I + Ki·T·(r − y), −100 − (P + D + F), 100 − (P + D + F))
 *     u = clamp(P + I + D + F, ±100), put out in steps of 0.01 %
 *
 * Set-point weights β, γ after Åström & Hägglund: PID 1, 1; PI-D 1, 0; I-PD 0, 0.
 */
export class Controller {
  gains: Gains = { kp: 0, ki: 0, kd: 0, kv: 0, ka: 0 };
  structure: Structure = 'PI-D';
  /** I, % */
  integrator = 0;
  private beta = 1;
  private gamma = 0;
  private lastTarget = 0;
  private lastPosition = 0;

  /** @param sampleTime T, s */
  constructor(private readonly sampleTime: number) {}

  /** Takes its first gains at rest at a position, mm, with output 0. */
  start(gains: Gains, structure: Structure, position: number): void {
    this.lastTarget = position;
    this.lastPosition = position;
    this.load(gains, structure);
    this.integrator = -this.gains.kp * (this.beta * position - position);
  }

  /**
   * Takes new gains without a bump: at rest the integrator takes over what the proportional part gives up, so
   * P + I, and with it the output, stays.
   */
  change(gains: Gains, structure: Structure): void {
    const held = this.proportional() + this.integrator;
    this.load(gains, structure);
    this.integrator = held - this.proportional();
  }

  private proportional(): number {
    return this.gains.kp * (this.beta * this.lastTarget - this.lastPosition);
  }

  private load(gains: Gains, structure: Structure): void {
    this.gains = inRegisters(gains);
    this.structure = structure;
    this.beta = structure === 'I-PD' ? 0 : 1;
    this.gamma = structure === 'PID' ? 1 : 0;
  }

  /**
   * One tick.
   *
   * @param position y as measured, mm
   * @returns the output, % (a multiple of 0.01)
   */
  tick(target: Target, position: number): number {
    const { sampleTime: T, beta, gamma } = this;
    const { kp, ki, kd, kv, ka } = this.gains;
    const r = target.position;
    const P = kp * (beta * r - position);
    const D = (kd * (gamma * r - position - (gamma * this.lastTarget - this.lastPosition))) / T;
    const rest = P + D + kv * target.velocity + ka * target.acceleration;
    const grown = this.integrator + ki * T * (r - position);
    this.integrator = Math.min(Math.max(grown, -LIMIT - rest), LIMIT - rest);
    this.lastTarget = r;
    this.lastPosition = position;
    const u = Math.min(Math.max(rest + this.integrator, -LIMIT), LIMIT);
    return Math.round(u * OUTPUT_STEPS) / OUTPUT_STEPS;
  }
}
