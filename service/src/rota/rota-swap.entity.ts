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

export const SWAP_STATES = ['asked', 'accepted', 'declined', 'withdrawn'] as const;
export type SwapState = (typeof SWAP_STATES)[number];

/** One person on call asks another to take over a time of theirs, and may offer to take one of the other's in return. */
@Entity()
@Index(['siteId', 'state'])
export class RotaSwap {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column()
  askedById: number;

  @ManyToOne(() => User, { nullable: false })
  @JoinColumn({ name: 'askedById' })
  askedBy: Relation<User>;

  @Column()
  askedOfId: number;

  @ManyToOne(() => User, { nullable: false })
  @JoinColumn({ name: 'askedOfId' })
  askedOf: Relation<User>;

  /** What the other one takes over. */
  @Column({ type: 'datetime' })
  from: Date;

  @Column({ type: 'datetime' })
  to: Date;

  /** What the asking one takes in return; null for nothing. */
  @Column({ type: 'datetime', nullable: true })
  returnFrom: Date | null;

  @Column({ type: 'datetime', nullable: true })
  returnTo: Date | null;

  @Column()
  reason: string;

  @Column({ type: 'text', default: 'asked' })
  state: SwapState;

  @CreateDateColumn()
  createdAt: Date;

  @Column({ type: 'datetime', nullable: true })
  answeredAt: Date | null;
}
