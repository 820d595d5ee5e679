import { Column, Entity, PrimaryColumn } from 'typeorm';
import type { RetentionKind } from './retention.js';

/** How long one kind of data is kept, as the administrator set it. */
@Entity()
export class RetentionSetting {
  @PrimaryColumn({ type: 'text' })
  kind: RetentionKind;

  /** s */
  @Column()
  keptSeconds: number;
}
