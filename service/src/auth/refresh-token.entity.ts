import { Column, Entity, Index, JoinColumn, ManyToOne, PrimaryGeneratedColumn, type Relation } from 'typeorm';
import { User } from '../people/user.entity.js';

/** One link in the chain of refresh tokens that a sign-in started. Each is good for one use. */
@Entity()
@Index(['family'])
@Index(['userId'])
export class RefreshToken {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  userId: number;

  @ManyToOne(() => User, { nullable: false })
  @JoinColumn({ name: 'userId' })
  user: Relation<User>;

  /** The sign-in that this token descends from. */
  @Column()
  family: string;

  /** SHA-256 of the token. */
  @Column({ unique: true })
  tokenHash: string;

  @Column({ type: 'datetime' })
  createdAt: Date;

  @Column({ type: 'datetime' })
  expiresAt: Date;

  @Column({ type: 'datetime', nullable: true })
  usedAt: Date | null;

  @Column({ type: 'datetime', nullable: true })
  revokedAt: Date | null;
}
