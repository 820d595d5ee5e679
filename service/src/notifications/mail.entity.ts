import { Column, CreateDateColumn, Entity, Index, PrimaryGeneratedColumn } from 'typeorm';

export const MAIL_STATES = ['queued', 'sent', 'failed'] as const;
export type MailState = (typeof MAIL_STATES)[number];

/** A mail that must go out, kept until it has and afterwards for the record. */
@Entity('mail_outbox')
@Index(['state', 'nextAttemptAt'])
@Index(['alertId'])
export class Mail {
  @PrimaryGeneratedColumn()
  id: number;

  /** What the mail is about, once: the same key is never mailed twice. */
  @Column({ unique: true })
  key: string;

  @Column()
  to: string;

  @Column()
  subject: string;

  @Column()
  text: string;

  @Column()
  html: string;

  @Column({ type: 'integer', nullable: true })
  siteId: number | null;

  @Column({ type: 'integer', nullable: true })
  alertId: number | null;

  @Column({ type: 'text', default: 'queued' })
  state: MailState;

  @Column({ default: 0 })
  attempts: number;

  @Column({ type: 'datetime' })
  nextAttemptAt: Date;

  @CreateDateColumn()
  createdAt: Date;

  @Column({ type: 'datetime', nullable: true })
  sentAt: Date | null;

  /** What the mail server answered last, when it did not take the mail. */
  @Column({ type: 'text', nullable: true })
  error: string | null;
}
