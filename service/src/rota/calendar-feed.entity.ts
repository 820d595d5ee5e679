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

/** A private address at which a calendar program reads a site's rota without signing in. */
@Entity()
@Index(['userId'])
export class CalendarFeed {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  userId: number;

  @ManyToOne(() => User, { nullable: false })
  @JoinColumn({ name: 'userId' })
  user: Relation<User>;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  /** Only the person's own shifts. */
  @Column()
  own: boolean;

  /** The address itself is shown once and not kept. */
  @Column({ unique: true })
  tokenHash: string;

  @CreateDateColumn()
  createdAt: Date;

  @Column({ type: 'datetime', nullable: true })
  lastReadAt: Date | null;

  @Column({ type: 'datetime', nullable: true })
  revokedAt: Date | null;
}
