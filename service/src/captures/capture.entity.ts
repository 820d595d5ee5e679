import { Column, Entity, Index, JoinColumn, ManyToOne, PrimaryGeneratedColumn, type Relation } from 'typeorm';
import { Axis } from '../fleet/axis.entity.js';
import { Site } from '../fleet/site.entity.js';
import type { PlantEstimate, Verdict } from '../identification/plant-estimate.js';
import { User } from '../people/user.entity.js';

export const CAPTURE_STATUSES = ['queued', 'running', 'done', 'failed'] as const;
export type CaptureStatus = (typeof CAPTURE_STATUSES)[number];
export const CAPTURE_SOURCES = ['upload', 'on demand', 'alert'] as const;
export type CaptureSource = (typeof CAPTURE_SOURCES)[number];

/** Which columns of a file mean what, and in which units. */
export interface CaptureMapping {
  time: string;
  target?: string;
  position: string;
  output: string;
  units?: {
    time?: 's' | 'ms' | 'us';
    position?: 'mm' | 'um' | 'm' | 'in';
    output?: 'percent' | 'fraction' | 'volts10';
  };
}

/** What identification says of a capture; the traces are in its file. */
export interface CaptureResult {
  verdict: Verdict;
  remarks: readonly string[];
  movingSeconds: number;
  estimate: PlantEstimate | null;
}

/** A recorded stretch of samples. Its files lie in the data folder under its id. */
@Entity()
@Index(['siteId'])
@Index(['axisId'])
@Index(['status'])
export class Capture {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column({ type: 'integer', nullable: true })
  axisId: number | null;

  @ManyToOne(() => Axis, { nullable: true })
  @JoinColumn({ name: 'axisId' })
  axis: Relation<Axis> | null;

  @Column({ type: 'varchar' })
  source: CaptureSource;

  /** The alert it was kept around. */
  @Column({ type: 'integer', nullable: true })
  alertId: number | null;

  @Column({ type: 'datetime' })
  createdAt: Date;

  /** Null for what the service kept by itself. */
  @Column({ type: 'integer', nullable: true })
  createdById: number | null;

  @ManyToOne(() => User, { nullable: true })
  @JoinColumn({ name: 'createdById' })
  createdBy: Relation<User> | null;

  /** As the person named the file; shown, never used as a path. */
  @Column()
  fileName: string;

  @Column({ type: 'varchar' })
  status: CaptureStatus;

  /** Why it failed, in plain words. */
  @Column({ type: 'text', nullable: true })
  problem: string | null;

  @Column({ type: 'simple-json', nullable: true })
  mapping: CaptureMapping | null;

  /** Its samples are on disk; false while they are still being recorded. */
  @Column()
  recorded: boolean;

  @Column({ type: 'integer', nullable: true })
  samples: number | null;

  /** s */
  @Column({ type: 'double', nullable: true })
  sampleTime: number | null;

  /** s */
  @Column({ type: 'double', nullable: true })
  duration: number | null;

  @Column({ type: 'simple-json', nullable: true })
  result: CaptureResult | null;
}

/** A capture as it begins: waiting, its samples not yet on disk, nothing known of them. */
export const newCapture = (
  of: Pick<Capture, 'siteId' | 'axisId' | 'source' | 'alertId' | 'createdById' | 'fileName' | 'mapping'>,
) => ({
  ...of,
  createdAt: new Date(),
  status: 'queued' as const,
  problem: null,
  recorded: false,
  samples: null,
  sampleTime: null,
  duration: null,
  result: null,
});
