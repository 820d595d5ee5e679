import {
  Column,
  Entity,
  Index,
  JoinColumn,
  ManyToOne,
  OneToMany,
  PrimaryGeneratedColumn,
  type Relation,
} from 'typeorm';
import { Axis } from '../fleet/axis.entity.js';
import type { RuleName } from './rules.js';

export const ALERT_STATES = [
  'unacknowledged',
  'acknowledged',
  'returned-unacknowledged',
  'shelved',
  'suppressed',
  'normal',
] as const;
/** Alert states by ANSI/ISA-18.2: `normal` is over, `suppressed` by design while the axis is in maintenance. */
export type AlertState = (typeof ALERT_STATES)[number];

export const PRIORITIES = ['high', 'medium', 'low'] as const;
export type Priority = (typeof PRIORITIES)[number];

@Entity()
@Index(['axisId', 'rule'], { unique: true, where: `"state" <> 'normal'` })
@Index(['state'])
export class Alert {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @Column()
  axisId: number;

  @ManyToOne(() => Axis, { nullable: false })
  @JoinColumn({ name: 'axisId' })
  axis: Relation<Axis>;

  @Column({ type: 'text' })
  rule: RuleName;

  @Column({ type: 'text' })
  priority: Priority;

  @Column({ type: 'text' })
  state: AlertState;

  /** By the samples' own clock for what samples show, by the service's for silence. */
  @Column({ type: 'datetime' })
  raisedAt: Date;

  @Column({ type: 'datetime', nullable: true })
  acknowledgedAt: Date | null;

  @Column({ type: 'text', nullable: true })
  acknowledgedBy: string | null;

  @Column({ type: 'datetime', nullable: true })
  returnedAt: Date | null;

  @Column({ type: 'datetime', nullable: true })
  shelvedUntil: Date | null;

  @Column({ type: 'text', nullable: true })
  shelvedBy: string | null;

  @Column({ type: 'text', nullable: true })
  shelveReason: string | null;

  /** What was measured when it was raised or last looked at, in the rule's unit. */
  @Column('real')
  value: number;

  @Column('real')
  threshold: number;

  @Column()
  message: string;

  /** What to do. */
  @Column()
  action: string;

  /** How many mails have gone out about it. */
  @Column({ default: 0 })
  stepsTaken: number;

  /** When the next person is told unless somebody acknowledges; null when nobody is to be told. */
  @Column({ type: 'datetime', nullable: true })
  nextStepAt: Date | null;

  @OneToMany(() => AlertEvent, (event) => event.alert)
  events: Relation<AlertEvent[]>;
}

/** One thing that happened to an alert, and by whom. */
@Entity()
@Index(['alertId'])
export class AlertEvent {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  alertId: number;

  @ManyToOne(() => Alert, (alert) => alert.events, { nullable: false })
  @JoinColumn({ name: 'alertId' })
  alert: Relation<Alert>;

  @Column({ type: 'datetime' })
  at: Date;

  /** A person's name, or "service". */
  @Column()
  by: string;

  @Column()
  action: string;

  @Column({ type: 'text', nullable: true })
  note: string | null;
}
