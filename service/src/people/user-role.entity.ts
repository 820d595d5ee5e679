import { Column, Entity, Index, JoinColumn, ManyToOne, PrimaryColumn, type Relation } from 'typeorm';
import type { Role } from '../auth/policy.js';
import { Site } from '../fleet/site.entity.js';
import { User } from './user.entity.js';

/** What a person is on a site: one role per person and site. */
@Entity()
@Index(['siteId'])
export class UserRole {
  @PrimaryColumn()
  userId: number;

  @ManyToOne(() => User, (user) => user.roles, { nullable: false })
  @JoinColumn({ name: 'userId' })
  user: Relation<User>;

  @PrimaryColumn()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column({ type: 'text' })
  role: Role;
}
