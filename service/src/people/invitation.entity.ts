import {
  Column,
  CreateDateColumn,
  Entity,
  JoinColumn,
  ManyToOne,
  PrimaryGeneratedColumn,
  type Relation,
} from 'typeorm';
import type { Role } from '../auth/policy.js';
import { User } from './user.entity.js';

export const INVITATION_PURPOSES = ['invitation', 'password-reset'] as const;
export type InvitationPurpose = (typeof INVITATION_PURPOSES)[number];

/** A single-use link by which somebody gets an account, further roles, or a new password. */
@Entity()
export class Invitation {
  @PrimaryGeneratedColumn()
  id: number;

  @Column({ type: 'text' })
  purpose: InvitationPurpose;

  /** In lower case; null on the link for the first administrator, who names an address when accepting. */
  @Column({ type: 'text', nullable: true })
  email: string | null;

  @Column()
  name: string;

  /** Whose password is to be reset; null on an invitation. */
  @Column({ type: 'integer', nullable: true })
  userId: number | null;

  @ManyToOne(() => User, { nullable: true })
  @JoinColumn({ name: 'userId' })
  user: Relation<User> | null;

  @Column('simple-json')
  roles: { siteId: number; role: Role }[];

  /** Whether who accepts may register sites. */
  @Column({ default: false })
  owner: boolean;

  /** SHA-256 of the token; the token itself is only in the link. */
  @Column({ unique: true })
  tokenHash: string;

  @CreateDateColumn()
  createdAt: Date;

  /** Who invited; null when the service or the person did. */
  @Column({ type: 'integer', nullable: true })
  createdById: number | null;

  @ManyToOne(() => User, { nullable: true })
  @JoinColumn({ name: 'createdById' })
  createdBy: Relation<User> | null;

  @Column({ type: 'datetime' })
  expiresAt: Date;

  @Column({ type: 'datetime', nullable: true })
  acceptedAt: Date | null;

  @Column({ type: 'datetime', nullable: true })
  revokedAt: Date | null;
}
