import { Column, Entity, Index, PrimaryGeneratedColumn } from 'typeorm';

/** A link by which one person acknowledges one alert, once, without signing in. */
@Entity()
@Index(['alertId'])
export class AcknowledgeLink {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  alertId: number;

  /** The alert may come back later under the same number; the link is for this time only. */
  @Column({ type: 'datetime' })
  raisedAt: Date;

  @Column()
  userId: number;

  @Column({ type: 'datetime' })
  expiresAt: Date;

  @Column({ type: 'datetime', nullable: true })
  usedAt: Date | null;
}
