import { Column, CreateDateColumn, Entity, OneToMany, PrimaryGeneratedColumn, type Relation } from 'typeorm';
import { UserRole } from './user-role.entity.js';

/** A person who can sign in. Never deleted, so that the record keeps its names; disabled instead. */
@Entity()
export class User {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  name: string;

  /** In lower case. */
  @Column({ unique: true })
  email: string;

  /** argon2id in PHC string format. */
  @Column()
  passwordHash: string;

  /** May register sites without being administrator of one: the first person of an empty system. */
  @Column({ default: false })
  owner: boolean;

  @Column({ default: false })
  disabled: boolean;

  /** Made by the demo with a password that everybody knows: shut out when the service does not run as a demo. */
  @Column({ default: false })
  demo: boolean;

  /** One mail each morning about the sites on which they are an engineer. */
  @Column({ default: true })
  dailyDigest: boolean;

  /** For SMS, in the form of ITU-T E.164. */
  @Column({ type: 'text', nullable: true })
  phone: string | null;

  @Column({ default: false })
  smsAlerts: boolean;

  @Column({ type: 'datetime', nullable: true })
  lastSignInAt: Date | null;

  @CreateDateColumn()
  createdAt: Date;

  @OneToMany(() => UserRole, (role) => role.user)
  roles: Relation<UserRole[]>;
}
