import {
  Column,
  CreateDateColumn,
  Entity,
  Index,
  JoinColumn,
  ManyToOne,
  OneToMany,
  PrimaryGeneratedColumn,
  Unique,
  type Relation,
} from 'typeorm';
import type { Gains, PolePattern, Structure } from '../control/pole-placement.js';
import { Axis } from '../fleet/axis.entity.js';
import type { Binding } from '../control/binding.js';
import type { CurrentTuning, Evidence, Expected } from './evidence.js';
import type { Cause } from '../identification/probable-cause.js';
import type { TrialResult } from './trial.js';

export const PROPOSAL_STATES = [
  'drafted',
  'in review',
  'approved',
  'scheduled',
  'applying',
  'on trial',
  'kept',
  'rolled back',
  'declined',
  'withdrawn',
  'superseded',
  'expired',
] as const;
export type ProposalState = (typeof PROPOSAL_STATES)[number];

/** The states in which a proposal still wants something from somebody. One such proposal per axis. */
export const LIVE_STATES = [
  'drafted',
  'in review',
  'approved',
  'scheduled',
  'applying',
  'on trial',
] as const satisfies readonly ProposalState[];

/** The gains on offer and how they came about. */
export interface Proposed {
  structure: Structure;
  /** null where a person gave the gains by hand */
  pattern: PolePattern | null;
  feedForward: boolean;
  gains: Gains;
}

@Entity()
@Index(['axisId'], {
  unique: true,
  where: `"state" IN ('drafted','in review','approved','scheduled','applying','on trial')`,
})
@Index(['state'])
export class Proposal {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @Column()
  axisId: number;

  @ManyToOne(() => Axis, { nullable: false })
  @JoinColumn({ name: 'axisId' })
  axis: Relation<Axis>;

  @Column({ type: 'text' })
  state: ProposalState;

  /** Goes up with every alteration; an approval is of one version. */
  @Column()
  version: number;

  @Column({ type: 'text' })
  source: 'drift' | 'person';

  @Column('simple-json')
  evidence: Evidence;

  @Column({ type: 'simple-json', nullable: true })
  probableCause: Cause | null;

  @Column('simple-json')
  current: CurrentTuning;

  /** null when no gains can be proposed; `noGainsReason` says why. */
  @Column({ type: 'simple-json', nullable: true })
  proposed: Proposed | null;

  @Column({ type: 'text', nullable: true })
  noGainsReason: string | null;

  @Column({ type: 'simple-json', nullable: true })
  expected: Expected | null;

  @Column({ type: 'simple-json', nullable: true })
  binding: Binding | null;

  @Column({ type: 'text', nullable: true })
  note: string | null;

  @CreateDateColumn()
  createdAt: Date;

  /** Who last altered it; null while it is as the service made it. */
  @Column({ type: 'integer', nullable: true })
  alteredById: number | null;

  @Column({ type: 'integer', nullable: true })
  submittedById: number | null;

  @Column({ type: 'integer', nullable: true })
  approvedById: number | null;

  @Column({ type: 'integer', nullable: true })
  approvedVersion: number | null;

  @Column({ type: 'datetime', nullable: true })
  windowFrom: Date | null;

  @Column({ type: 'datetime', nullable: true })
  windowTo: Date | null;

  /** The tuning revision that apply sends; set before the gains leave. */
  @Column({ type: 'integer', nullable: true })
  revision: number | null;

  @Column({ type: 'datetime', nullable: true })
  sentAt: Date | null;

  @Column({ type: 'integer', nullable: true })
  appliedById: number | null;

  @Column({ type: 'datetime', nullable: true })
  appliedAt: Date | null;

  /** True while the revision on its way is the former one, asked for by a roll-back. */
  @Column({ default: false })
  rollingBack: boolean;

  /**
   * True while the machine may run with other gains than the axis's revision says: gains left and were not read back,
   * and those of the revision were asked for and not read back yet either.
   */
  @Column({ default: false })
  restoring: boolean;

  @Column({ type: 'simple-json', nullable: true })
  trial: TrialResult | null;

  @OneToMany(() => ProposalEvent, (event) => event.proposal)
  events: Relation<ProposalEvent[]>;

  @OneToMany(() => ProposalVersion, (version) => version.proposal)
  versions: Relation<ProposalVersion[]>;
}

/** The gains on offer at one version, and who made it: altered by a new version only. */
@Entity()
@Unique(['proposalId', 'version'])
export class ProposalVersion {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  proposalId: number;

  @ManyToOne(() => Proposal, (proposal) => proposal.versions, { nullable: false })
  @JoinColumn({ name: 'proposalId' })
  proposal: Relation<Proposal>;

  @Column()
  version: number;

  @Column({ type: 'datetime' })
  at: Date;

  /** A person's name, or "service". */
  @Column()
  by: string;

  @Column({ type: 'simple-json', nullable: true })
  proposed: Proposed | null;

  @Column({ type: 'text', nullable: true })
  note: string | null;
}

/** One step of a proposal's life, and by whom. */
@Entity()
@Index(['proposalId'])
export class ProposalEvent {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  proposalId: number;

  @ManyToOne(() => Proposal, (proposal) => proposal.events, { nullable: false })
  @JoinColumn({ name: 'proposalId' })
  proposal: Relation<Proposal>;

  @Column({ type: 'datetime' })
  at: Date;

  /** A person's name, or "service". */
  @Column()
  by: string;

  @Column()
  action: string;

  @Column({ type: 'text', nullable: true })
  note: string | null;

  @Column()
  version: number;
}
