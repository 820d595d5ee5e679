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
  'out-of-service',
  'normal',
] as const;
/**
 * Alert states by ANSI/ISA-18.2: `normal` is over; `suppressed` is by design, while the axis is in maintenance or its
 * gateway is known down; `out-of-service` was set by a person and ends by a person.
 */
export type AlertState = (typeof ALERT_STATES)[number];

export const PRIORITIES = ['high', 'medium', 'low'] as const;
export type Priority = (typeof PRIORITIES)[number];

@Entity()
@Index(['axisId', 'rule'], { unique: true, where: `"state" <> 'normal'` })
@Index(['state'])
@Index('IDX_alert_raisedAt', ['raisedAt'])
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

  /** Why it is suppressed, in a sentence; null while it is not. */
  @Column({ type: 'text', nullable: true })
  suppressedBecause: string | null;

  @Column({ type: 'text', nullable: true })
  outOfServiceBy: string | null;

  @Column({ type: 'text', nullable: true })
  outOfServiceReason: string | null;

  /** The gateway for all of whose silent axes this alert speaks; null for an alert about its own axis only. */
  @Column({ type: 'integer', nullable: true })
  gatewayId: number | null;

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

  /** What happens when nobody does anything. */
  @Column({ type: 'text', nullable: true })
  consequence: string | null;

  /** s from when it began to stand in which somebody should respond; null where nothing is said. */
  @Column({ type: 'integer', nullable: true })
  respondWithin: number | null;

  /** When it last became unacknowledged: raised, raised again, or back from a shelf, suppression or out of service. */
  @Column({ type: 'datetime', nullable: true })
  standsSince: Date | null;

  /** Steps of the escalation taken since then. */
  @Column({ default: 0 })
  stepsTaken: number;

  /** When the site's fallback was last told because nobody was on call; null when that was not needed. */
  @Column({ type: 'datetime', nullable: true })
  fallbackToldAt: Date | null;

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
