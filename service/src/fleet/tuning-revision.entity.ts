import {
  Column,
  Entity,
  JoinColumn,
  ManyToOne,
  PrimaryGeneratedColumn,
  Unique,
  type Relation,
} from 'typeorm';
import type { Gains, PolePattern, Structure } from '../control/pole-placement.js';
import { Axis, type Baseline } from './axis.entity.js';

export type TuningSource = 'commissioning' | 'proposal' | 'roll-back';

/** One set of gains that an axis has run with: numbered, with who, when and why. Never altered. */
@Entity()
@Unique(['axisId', 'revision'])
export class TuningRevision {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  axisId: number;

  @ManyToOne(() => Axis, { nullable: false })
  @JoinColumn({ name: 'axisId' })
  axis: Relation<Axis>;

  @Column()
  revision: number;

  @Column({ type: 'text' })
  structure: Structure;

  /** null where the gains were given and not placed */
  @Column({ type: 'simple-json', nullable: true })
  pattern: PolePattern | null;

  @Column()
  feedForward: boolean;

  @Column('simple-json')
  gains: Gains;

  /** The plant these gains were computed for. */
  @Column({ type: 'simple-json', nullable: true })
  plant: Baseline | null;

  @Column({ type: 'text' })
  source: TuningSource;

  @Column({ type: 'integer', nullable: true })
  proposalId: number | null;

  @Column({ type: 'datetime' })
  appliedAt: Date;

  @Column()
  appliedBy: string;

  @Column({ type: 'text', nullable: true })
  note: string | null;
}
