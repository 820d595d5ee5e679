import {
  Column,
  CreateDateColumn,
  Entity,
  JoinColumn,
  ManyToOne,
  PrimaryGeneratedColumn,
  Unique,
  type Relation,
} from 'typeorm';
import { Site } from './site.entity.js';

/** What stands between a site's controllers and the service; it streams samples and carries gains to the axes. */
@Entity()
@Unique(['siteId', 'name'])
export class Gateway {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column()
  name: string;

  /** SHA-256 of the token; the token itself is shown once, when it is made. */
  @Column({ unique: true })
  tokenHash: string;

  /** The gateway's counting period; null until its first `hello`. */
  @Column({ type: 'text', nullable: true })
  epoch: string | null;

  /** Everything up to this sequence of the epoch is in the database. */
  @Column({ default: 0 })
  durableSequence: number;

  @Column({ type: 'datetime', nullable: true })
  lastSeenAt: Date | null;

  @CreateDateColumn()
  createdAt: Date;
}
