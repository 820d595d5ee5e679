import { Column, CreateDateColumn, Entity, Index, PrimaryGeneratedColumn } from 'typeorm';

/** `grouped`: it went out as a line of another mail. */
export const MAIL_STATES = ['queued', 'sent', 'failed', 'grouped'] as const;
export type MailState = (typeof MAIL_STATES)[number];

/** By which way something goes out. */
export const CHANNELS = ['mail', 'push', 'sms'] as const;
export type Channel = (typeof CHANNELS)[number];

/** A mail, push message or SMS that must go out, kept until it has and afterwards for the record. */
@Entity('mail_outbox')
@Index(['state', 'nextAttemptAt'])
@Index(['alertId'])
@Index(['to', 'createdAt'])
export class Mail {
  @PrimaryGeneratedColumn()
  id: number;

  /** What the mail is about, once: the same key is never mailed twice. */
  @Column({ unique: true })
  key: string;

  @Column({ type: 'text', default: 'mail' })
  channel: Channel;

  /** A mail address, a phone number, or the number of a push subscription. */
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

  /** SVG that a mail shows above its text. */
  @Column({ type: 'text', nullable: true })
  picture: string | null;

  /** The picture in words. */
  @Column({ type: 'text', nullable: true })
  pictureText: string | null;

  /** When an attempt began of which nobody knows yet how it ended. */
  @Column({ type: 'datetime', nullable: true })
  startedAt: Date | null;

  /** An attempt was cut off after it may have succeeded: what goes out next may be a second copy, and says so. */
  @Column({ default: false })
  perhapsAgain: boolean;

  /** The mail in which this one went out. */
  @Column({ type: 'integer', nullable: true })
  groupId: number | null;
}
