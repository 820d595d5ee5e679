import { Column, Entity, PrimaryColumn } from 'typeorm';
import type { Priority } from './alert.entity.js';
import type { RuleName } from './rules.js';

/** When a rule raises, clears and tells, for the whole fleet. Delays in s. */
@Entity()
export class AlertRule {
  @PrimaryColumn({ type: 'text' })
  rule: RuleName;

  /** Share of the axis's own tolerance, or the rule's own unit where no tolerance exists (see `rules.ts`). */
  @Column('real')
  threshold: number;

  /** The value must fall this far below the threshold before the alert clears; same unit. */
  @Column('real')
  deadband: number;

  @Column()
  onDelay: number;

  @Column()
  offDelay: number;

  @Column({ type: 'text' })
  priority: Priority;

  /** Time without acknowledgement before the person on call gets a mail. */
  @Column()
  mailAfter: number;

  /** How long the level must be unknown before what it raised counts as over; null: as the rule is made. */
  @Column({ type: 'integer', nullable: true })
  unknownAfter: number | null;

  /** In which somebody should respond; null: as the rule is made. */
  @Column({ type: 'integer', nullable: true })
  respondWithin: number | null;

  /** What happens when nobody does anything; null: as the rule is made. */
  @Column({ type: 'text', nullable: true })
  consequence: string | null;

  /** What to do; null: as the rule works it out from the evidence. */
  @Column({ type: 'text', nullable: true })
  whatToDo: string | null;
}
