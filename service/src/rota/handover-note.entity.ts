import { Column, Entity, Index, JoinColumn, ManyToOne, PrimaryGeneratedColumn, type Relation } from 'typeorm';
import { Site } from '../fleet/site.entity.js';
import { User } from '../people/user.entity.js';

/** What the person on call leaves for the next one. */
@Entity()
@Index(['siteId'])
export class HandoverNote {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column({ type: 'datetime' })
  at: Date;

  @Column()
  userId: number;

  @ManyToOne(() => User, { nullable: false })
  @JoinColumn({ name: 'userId' })
  user: Relation<User>;

  @Column()
  text: string;
}
