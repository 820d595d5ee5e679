import { Column, Entity, PrimaryColumn } from 'typeorm';
import type { Priority } from './alert.entity.js';
import type { RuleName } from './rules.js';

/** When a rule raises, clears and tells. Delays in s. */
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

  /** Time without acknowledgement before the person on call gets a mail, and again before each later one. */
  @Column()
  mailAfter: number;
}
