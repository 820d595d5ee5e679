import { Controller, inRegisters, type Gains, type Structure, type Target } from './controller.js';
import { physicsWith, reached, type ActiveFault, type Fault, type ScheduledFault } from './faults.js';
import { Body, type Physics } from './physics.js';
import { Program, type Step } from './program.js';
import { randomFrom, type Random } from './random.js';

/** The machine side of an axis: what it is made of and what it does all day. */
export interface AxisMake {
  tag: string;
  physics: Physics;
  /** Encoder resolution q, mm per count. */
  resolution: number;
  /** Standard deviation of the measurement noise before rounding, in counts. */
  noiseCounts: number;
  /** T, s. */
  sampleTime: number;
  /** Hard stops, mm. */
  travel: { min: number; max: number };
  program: readonly Step[];
}

/** What an axis did: target and position in counts, output in 0.01 %. */
export interface Samples {
  target: Int32Array;
  position: Int32Array;
  output: Int16Array;
}

/** Gains on their way to the controller. */
export interface GainsOrder {
  revision: number;
  gains: Gains;
  structure: Structure;
}

/** An axis held in maintenance and within this many counts of one place for this time, s, is at rest. */
const REST_COUNTS = 5;
const REST_SECONDS = 0.3;
/** An order that the axis could not take within this time, s, is dropped. */
const ORDER_LIFE = 10;
/** Slow faults move on this often, s. */
const RAMP_STEP = 0.01;
/** Restless motion, Hz. */
const RESTLESS_HZ = 0.5;

/** One simulated axis: body, encoder, controller and production program, with its faults. Runs in its own time. */
export class Axis {
  readonly controller: Controller;
  revision = 0;
  maintenance = false;
  faults: ActiveFault[] = [];
  /** Faults that come by themselves; each is taken out once it has come. */
  scheduled: ScheduledFault[] = [];
  private physicsNow: Physics;
  private readonly body: Body;
  private readonly program: Program;
  private readonly noise: Random;
  private readonly rampTicks: number;
  private running = false;
  private ticks = 0;
  private grain = 1;
  private restless = 0;
  private restlessTicks = 0;
  /** Gains as they were ordered last, before anybody changed them at the machine. */
  private ordered: Pick<GainsOrder, 'gains' | 'structure'> | null = null;
  private order: (GainsOrder & { until: number }) | null = null;
  private stillTicks = 0;
  private stillTarget = NaN;
  private stillCount = NaN;
  private readonly restlessTarget: Target = { position: 0, velocity: 0, acceleration: 0 };

  /** @param seed decides noise and variations of the program; each tag has its own of one seed */
  constructor(
    readonly make: AxisMake,
    seed: number,
  ) {
    const { tag, physics, sampleTime, travel, program } = make;
    this.program = new Program(program, sampleTime, randomFrom(seed, `${tag} program`));
    this.noise = randomFrom(seed, `${tag} noise`);
    this.body = new Body(physics, sampleTime, travel, this.program.home);
    this.controller = new Controller(sampleTime);
    this.physicsNow = physics;
    this.rampTicks = Math.max(1, Math.round(RAMP_STEP / sampleTime));
  }

  /** Axis time, s. */
  get time(): number {
    return this.ticks * this.make.sampleTime;
  }

  /** The machine as it is now, with its faults. */
  get physics(): Physics {
    return this.physicsNow;
  }

  /** True position, mm. */
  get position(): number {
    return this.body.position;
  }

  /** Whether it has gains and is under control; before, its brake holds it. */
  get started(): boolean {
    return this.running;
  }

  get moving(): boolean {
    return this.program.moving;
  }

  get silent(): boolean {
    return this.faults.some(({ kind }) => kind === 'silence');
  }

  get atRest(): boolean {
    return this.maintenance && !this.program.moving && this.stillTicks * this.make.sampleTime >= REST_SECONDS;
  }

  /** Takes over its first gains and goes into production. */
  start({ revision, gains, structure }: GainsOrder): void {
    this.controller.start(gains, structure, this.program.home);
    this.ordered = { gains: inRegisters(gains), structure };
    this.revision = revision;
    this.running = true;
    if (this.derivativeChanged) this.loadGains();
  }

  /** Into maintenance: the move under way is finished, then the axis stays. Out of it: production goes on. */
  setMaintenance(on: boolean): void {
    this.maintenance = on;
    if (on) this.program.hold();
    else this.program.release();
  }

  /** Gains wait until the axis is held at rest; a newer order replaces an older one. */
  orderGains(order: GainsOrder): void {
    this.order = { ...order, gains: inRegisters(order.gains), until: this.time + ORDER_LIFE };
  }

  /**
   * Takes waiting gains if the axis is at rest. A revision that it runs with already is not taken again.
   *
   * @returns the revision to answer for, null while there is nothing to answer
   */
  settleOrder(): number | null {
    const { order } = this;
    if (!order) return null;
    if (order.revision === this.revision && this.running) {
      this.order = null;
      return order.revision;
    }
    if (this.time > order.until) {
      this.order = null;
      return null;
    }
    if (!this.running) this.start(order);
    else if (!this.atRest) return null;
    else {
      this.faults = this.faults.filter(({ kind }) => kind !== 'derivative-gain');
      this.ordered = order;
      this.loadGains();
    }
    this.revision = order.revision;
    this.order = null;
    return order.revision;
  }

  /** The gains as a gateway reads them out of the controller. */
  readBack(): Gains {
    const gains = { ...this.controller.gains };
    for (const { kind, amount } of this.faults)
      if (kind === 'read-back') gains.kd = Math.fround(gains.kd * (1 + amount));
    return gains;
  }

  addFault(fault: Fault): void {
    this.faults.push({ ...fault, since: this.time });
    this.refresh();
    if (fault.kind === 'derivative-gain') this.loadGains();
  }

  /** Everything as it was made, the gains as they were ordered. */
  heal(): void {
    const changed = this.derivativeChanged;
    this.faults = [];
    this.refresh();
    if (changed) this.loadGains();
  }

  private get derivativeChanged(): boolean {
    return this.faults.some(({ kind }) => kind === 'derivative-gain');
  }

  /**
   * Puts the ordered gains into the controller, Kd as changed at the machine; velocity feed-forward that makes up
   * for it (PI-D: Kv = 1/K + Kd) goes with it.
   */
  private loadGains(): void {
    if (!this.ordered) return;
    const { gains, structure } = this.ordered;
    let kd = gains.kd;
    for (const { kind, amount } of this.faults) if (kind === 'derivative-gain') kd *= 1 + amount;
    const kv = structure === 'PI-D' && gains.kv !== 0 ? gains.kv + kd - gains.kd : gains.kv;
    this.controller.change({ ...gains, kd, kv }, structure);
  }

  private refresh(): void {
    this.physicsNow = physicsWith(this.make.physics, this.faults, this.time);
    this.body.change(this.physicsNow);
    this.grain = 1;
    this.program.speed = 1;
    this.restless = 0;
    for (const { kind, amount } of this.faults) {
      if (kind === 'coarse-resolution') this.grain *= amount;
      else if (kind === 'speed-up') this.program.speed *= 1 + amount;
      else if (kind === 'restless') this.restless = amount;
    }
  }

  /** Scheduled faults come and slow ones grow. */
  private age(): void {
    for (const { kind, amount, rampSeconds } of this.scheduled.filter(({ at }) => at <= this.time))
      this.addFault({ kind, amount, rampSeconds });
    this.scheduled = this.scheduled.filter(({ at }) => at > this.time);
    if (this.faults.some((fault) => reached(fault, this.time - 2 * RAMP_STEP) < 1)) this.refresh();
  }

  /** Lets n samples of time pass. */
  run(n: number): Samples {
    const { body, controller, make, noise } = this;
    const q = make.resolution;
    const target = new Int32Array(n);
    const position = new Int32Array(n);
    const output = new Int16Array(n);
    for (let k = 0; k < n; k++) {
      if (this.ticks % this.rampTicks === 0) this.age();
      const measured =
        this.grain * Math.round((body.position / q + make.noiseCounts * noise.normal()) / this.grain);
      const wanted = this.running ? this.nextTarget() : null;
      const count = wanted ? Math.round(wanted.position / q) : measured;
      if (wanted) {
        const u = controller.tick(wanted, measured * q);
        body.advance(u);
        output[k] = Math.round(u * 100);
      }
      target[k] = count;
      position[k] = measured;
      if (count === this.stillTarget && Math.abs(measured - this.stillCount) <= REST_COUNTS * this.grain)
        this.stillTicks++;
      else {
        this.stillTicks = 0;
        this.stillTarget = count;
        this.stillCount = measured;
      }
      this.ticks++;
    }
    return { target, position, output };
  }

  /** Time passes without anybody watching: the axis stays where it is and its clock goes on. */
  skip(n: number): void {
    this.ticks += n;
  }

  private nextTarget(): Target {
    const target = this.program.tick();
    if (this.restless === 0 || !this.maintenance || this.program.moving) {
      this.restlessTicks = 0;
      return target;
    }
    const w = 2 * Math.PI * RESTLESS_HZ;
    const angle = w * ++this.restlessTicks * this.make.sampleTime;
    const moved = this.restlessTarget;
    moved.position = target.position + this.restless * (1 - Math.cos(angle));
    moved.velocity = this.restless * w * Math.sin(angle);
    moved.acceleration = this.restless * w * w * Math.cos(angle);
    return moved;
  }
}
