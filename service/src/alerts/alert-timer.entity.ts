import { Column, Entity, PrimaryColumn } from 'typeorm';
import type { RuleName } from './rules.js';

/** How long a level has been beyond its threshold, or back from it: a restart of the service goes on from here. */
@Entity({ withoutRowid: true })
export class AlertTimer {
  @PrimaryColumn()
  axisId: number;

  @PrimaryColumn({ type: 'text' })
  rule: RuleName;

  /** Whether the rule's condition holds, delays counted in. */
  @Column()
  active: boolean;

  /** s since the Unix epoch; when the present crossing began, null while there is none */
  @Column({ type: 'real', nullable: true })
  since: number | null;

  /** s since the Unix epoch; since when the level of a condition that holds is unknown */
  @Column({ type: 'real', nullable: true })
  unknownSince: number | null;
}
