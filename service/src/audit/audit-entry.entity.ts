import { Column, Entity, Index, PrimaryGeneratedColumn } from 'typeorm';

/**
 * One line of the record: who did what to what, and why. Names people and things by value, so that it can be read
 * without any other table. Triggers refuse to alter or delete it, and each entry carries the hash of the one before.
 */
@Entity()
@Index(['subjectType', 'subjectId'])
@Index(['siteId'])
export class AuditEntry {
  @PrimaryGeneratedColumn()
  id: number;

  @Column({ type: 'datetime' })
  at: Date;

  /** null when the service itself acted */
  @Column({ type: 'integer', nullable: true })
  userId: number | null;

  /** The person's name at the time, or "Polewright". */
  @Column()
  actor: string;

  /** Such as "proposal.approve". */
  @Column()
  action: string;

  /** Such as "axis" or "person". */
  @Column()
  subjectType: string;

  /** A number or a name, as text. */
  @Column()
  subjectId: string;

  @Column({ type: 'integer', nullable: true })
  siteId: number | null;

  @Column({ type: 'text', nullable: true })
  note: string | null;

  @Column({ type: 'simple-json', nullable: true })
  before: unknown;

  @Column({ type: 'simple-json', nullable: true })
  after: unknown;

  /** Unique, so that the chain cannot fork. */
  @Column({ unique: true })
  previousHash: string;

  @Column({ unique: true })
  hash: string;
}
