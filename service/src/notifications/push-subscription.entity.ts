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
import { User } from '../people/user.entity.js';

/** A browser that a person has let show push messages (W3C Push API). */
@Entity()
@Index(['userId'])
export class PushSubscription {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  userId: number;

  @ManyToOne(() => User, { nullable: false })
  @JoinColumn({ name: 'userId' })
  user: Relation<User>;

  /** Where the browser's maker takes messages for it. */
  @Column({ unique: true })
  endpoint: string;

  /** The browser's public key and secret (RFC 8291), base64url. */
  @Column()
  p256dh: string;

  @Column()
  auth: string;

  /** What the person sees of it, such as "Firefox on Android". */
  @Column()
  browser: string;

  @CreateDateColumn()
  createdAt: Date;
}
