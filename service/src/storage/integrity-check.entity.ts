import { Column, Entity, PrimaryColumn } from 'typeorm';

/** What the last integrity check of the database or of one backup said. */
@Entity()
export class IntegrityCheck {
  /** "database", or the name of a backup's file. */
  @PrimaryColumn()
  subject: string;

  /** Size of the file that was checked: a file put in its place counts as unchecked. */
  @Column()
  bytes: number;

  @Column({ type: 'datetime' })
  at: Date;

  /** What is wrong, in plain words; null when nothing is. */
  @Column({ type: 'text', nullable: true })
  fault: string | null;
}
