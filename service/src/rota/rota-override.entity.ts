import {
  Column,
  CreateDateColumn,
  Entity,
  Index,
  JoinColumn,
  ManyToOne,
  PrimaryGeneratedColumn,
  type Relation,
} from 'typeorm';
import { Site } from '../fleet/site.entity.js';
import { User } from '../people/user.entity.js';

/** Somebody stands in from one instant to another. Where overrides overlap, the later made counts. */
@Entity()
@Index(['siteId', 'to'])
export class RotaOverride {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column()
  userId: number;

  @ManyToOne(() => User, { nullable: false })
  @JoinColumn({ name: 'userId' })
  user: Relation<User>;

  @Column({ type: 'datetime' })
  from: Date;

  @Column({ type: 'datetime' })
  to: Date;

  @Column()
  reason: string;

  @Column({ type: 'integer', nullable: true })
  createdById: number | null;

  @ManyToOne(() => User, { nullable: true })
  @JoinColumn({ name: 'createdById' })
  createdBy: Relation<User> | null;

  @CreateDateColumn()
  createdAt: Date;
}
