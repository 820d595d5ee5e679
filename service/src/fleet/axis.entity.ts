import {
  Column,
  CreateDateColumn,
  Entity,
  JoinColumn,
  ManyToOne,
  PrimaryGeneratedColumn,
  Unique,
  type Relation,
} from 'typeorm';
import type { PolePattern, Structure } from '../control/pole-placement.js';
import { Machine } from './machine.entity.js';
import { Site } from './site.entity.js';

export const AXIS_STATES = ['in-tune', 'drifting', 'out-of-tune', 'no-signal', 'in-maintenance'] as const;
export type AxisState = (typeof AXIS_STATES)[number];

export const ACTUATORS = ['electric', 'hydraulic'] as const;
export type Actuator = (typeof ACTUATORS)[number];

/** The plant as it was when the present gains were computed for it, or as an engineer confirmed it since. */
export interface Baseline {
  /** (mm/s)/% */
  gain: number;
  /** rad/s */
  pole: number;
  /** % of output; null until known */
  coulomb: number | null;
  /** % of output; null until known */
  bias: number | null;
  /** (mm/s)/% for forward travel; null where direction makes no difference or is not known */
  gainForward: number | null;
  /** (mm/s)/% for reverse travel */
  gainReverse: number | null;
}

export interface Tolerances {
  /** mm */
  followingError: number;
  /** % of the baseline gain */
  gainPct: number;
  /** % of the baseline pole */
  polePct: number;
  /** % of moving time with the output at its limit */
  saturatedPct: number;
}

@Entity()
@Unique(['siteId', 'tag'])
export class Axis {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column()
  machineId: number;

  @ManyToOne(() => Machine, { nullable: false })
  @JoinColumn({ name: 'machineId' })
  machine: Relation<Machine>;

  @Column()
  tag: string;

  @Column()
  name: string;

  @Column({ type: 'text' })
  actuator: Actuator;

  /** mm per count */
  @Column('real')
  resolution: number;

  /** s */
  @Column('real')
  sampleTime: number;

  @Column('simple-json')
  travel: { min: number; max: number };

  /** The axis's own typical move: mm, s. */
  @Column('simple-json')
  move: { distance: number; duration: number };

  @Column('simple-json')
  tolerances: Tolerances;

  /** As commissioned: what the engineer wants this axis to behave like. */
  @Column({ type: 'text' })
  structure: Structure;

  @Column('simple-json')
  pattern: PolePattern;

  @Column()
  feedForward: boolean;

  @Column({ type: 'simple-json', nullable: true })
  baseline: Baseline | null;

  @Column({ type: 'datetime', nullable: true })
  baselineAt: Date | null;

  /** Number of the tuning revision that the axis runs with. */
  @Column({ default: 0 })
  revision: number;

  @Column({ type: 'text', default: 'no-signal' })
  state: AxisState;

  @Column({ default: 'No samples yet.' })
  stateReason: string;

  @Column({ type: 'datetime', nullable: true })
  stateSince: Date | null;

  @Column({ default: false })
  inMaintenance: boolean;

  @Column({ type: 'datetime', nullable: true })
  maintenanceUntil: Date | null;

  @Column({ type: 'text', nullable: true })
  maintenanceReason: string | null;

  @Column({ type: 'text', nullable: true })
  maintenanceBy: string | null;

  @CreateDateColumn()
  createdAt: Date;
}
