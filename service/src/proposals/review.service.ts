import {
  BadRequestException,
  ConflictException,
  ForbiddenException,
  HttpException,
  Injectable,
  NotFoundException,
} from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { LessThan, type DataSource, type EntityManager } from 'typeorm';
import { may, requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { Axis, type Baseline } from '../fleet/axis.entity.js';
import { baselineOf } from '../fleet/axes.service.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { DraftingService, type Alteration } from './drafting.service.js';
import { Proposal, type ProposalState } from './proposal.entity.js';
import { StepRecorder, stateOf } from './step-recorder.js';
import { SAID, STEP, STEPS, type Step } from './steps.js';

const PRECONDITION_REQUIRED = 428;
/** Longest maintenance window, ms. */
const LONGEST_WINDOW = 14 * 86_400_000;

const DONE: Record<Exclude<Step, 'apply' | 'roll-back'>, string> = {
  alter: 'altered',
  submit: 'sent for review',
  approve: 'approved',
  decline: 'declined',
  withdraw: 'withdrawn',
  schedule: 'scheduled',
  keep: 'kept',
};

/** What a person may do with a proposal now, and why not the rest. */
export interface Possibilities {
  actions: Step[];
  refusals: Partial<Record<Step, string>>;
}

/** Carries proposals through review by a second person, and ends them. Applying is `ApplyService`'s. */
@Injectable()
export class ReviewService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly steps: StepRecorder,
    private readonly drafting: DraftingService,
    private readonly intake: IntakeService,
    private readonly emitter: EventEmitter2,
  ) {}

  /** A proposal that the person may see; what they may not see does not exist for them. */
  async get(id: number, user: SignedInUser): Promise<Proposal> {
    const proposal = await this.dataSource.getRepository(Proposal).findOne({
      where: { id },
      relations: { axis: { machine: true, site: true }, events: true, versions: true },
    });
    if (!proposal) throw new NotFoundException(`There is no proposal ${id}`);
    requireRole(user, proposal.siteId, 'see', `proposal ${id}`);
    proposal.events.sort((a, b) => a.id - b.id);
    proposal.versions.sort((a, b) => a.version - b.version);
    return proposal;
  }

  /** What the person may do now. */
  possibilities(proposal: Proposal, user: SignedInUser): Possibilities {
    const actions: Step[] = [];
    const refusals: Possibilities['refusals'] = {};
    for (const step of STEPS) {
      const refusal = refusalOf(proposal, step, user);
      if (refusal) refusals[step] = refusal.message;
      else actions.push(step);
    }
    return { actions, refusals };
  }

  /** Makes a new version; whatever was approved before is a draft again. */
  async alter(
    id: number,
    change: Alteration,
    ifMatch: string | undefined,
    user: SignedInUser,
  ): Promise<void> {
    if (ifMatch === undefined)
      throw new HttpException('Say which version you alter: If-Match: "version"', PRECONDITION_REQUIRED);
    const seen = await this.get(id, user);
    allow(seen, 'alter', user, ifMatch);
    const axis = await this.dataSource.getRepository(Axis).findOneByOrFail({ id: seen.axisId });
    const noGains = !change.pattern && !change.structure && !change.gains && change.feedForward === undefined;
    const pattern = change.pattern ?? seen.proposed?.pattern ?? axis.pattern;
    const worked = noGains
      ? {}
      : this.drafting.work(axis, seen.evidence.estimate, seen.current, {
          structure: change.structure ?? seen.proposed?.structure ?? axis.structure,
          pattern,
          feedForward: change.feedForward ?? seen.proposed?.feedForward ?? axis.feedForward,
          exactly: true,
          ...(change.gains && { gains: change.gains }),
        });
    await this.step(seen, 'alter', user, change.note ?? null, (proposal) =>
      Object.assign(proposal, worked, {
        version: proposal.version + 1,
        alteredById: user.id,
        submittedById: null,
        approvedById: null,
        approvedVersion: null,
        windowFrom: null,
        windowTo: null,
        ...(change.note !== undefined && { note: change.note }),
      }),
    );
  }

  /** Says something about a proposal; it changes neither state nor version, and an approval stays. */
  async comment(id: number, text: string, user: SignedInUser): Promise<void> {
    const seen = await this.get(id, user);
    requireRole(user, seen.siteId, 'proposal.discuss', `proposal ${id}`);
    await this.transactions.run(async (manager) => {
      const proposal = await manager.findOneByOrFail(Proposal, { id });
      await this.steps.note(manager, proposal, SAID, text, user);
    });
    this.changed(seen);
  }

  async submit(id: number, ifMatch: string | undefined, user: SignedInUser): Promise<void> {
    const seen = await this.get(id, user);
    allow(seen, 'submit', user, ifMatch);
    await this.step(seen, 'submit', user, null, (proposal) => (proposal.submittedById = user.id));
  }

  async approve(id: number, ifMatch: string | undefined, user: SignedInUser): Promise<void> {
    const seen = await this.get(id, user);
    allow(seen, 'approve', user, ifMatch);
    await this.step(seen, 'approve', user, null, (proposal) =>
      Object.assign(proposal, { approvedById: user.id, approvedVersion: proposal.version }),
    );
  }

  async decline(id: number, reason: string, ifMatch: string | undefined, user: SignedInUser): Promise<void> {
    const seen = await this.get(id, user);
    allow(seen, 'decline', user, ifMatch);
    await this.step(seen, 'decline', user, reason);
  }

  async withdraw(id: number, ifMatch: string | undefined, user: SignedInUser): Promise<void> {
    const seen = await this.get(id, user);
    allow(seen, 'withdraw', user, ifMatch);
    await this.step(seen, 'withdraw', user, null);
  }

  async schedule(
    id: number,
    from: Date,
    to: Date,
    ifMatch: string | undefined,
    user: SignedInUser,
  ): Promise<void> {
    const seen = await this.get(id, user);
    allow(seen, 'schedule', user, ifMatch);
    const wrong = (path: string, message: string): never => {
      throw new BadRequestException({ errors: [{ path, message }] });
    };
    if (to <= from) wrong('to', 'must be after from');
    if (to.getTime() <= Date.now()) wrong('to', 'must lie ahead');
    if (to.getTime() - from.getTime() > LONGEST_WINDOW) wrong('to', 'must be within 14 days of from');
    await this.step(seen, 'schedule', user, `${from.toISOString()} to ${to.toISOString()}`, (proposal) =>
      Object.assign(proposal, { windowFrom: from, windowTo: to }),
    );
  }

  /** Ends the trial: the gains stay, and the plant as it is now is the new baseline. */
  async keep(id: number, ifMatch: string | undefined, user: SignedInUser): Promise<void> {
    const seen = await this.get(id, user);
    allow(seen, 'keep', user, ifMatch);
    const estimate = this.intake.pipeline(seen.axisId)?.estimate;
    const baseline: Baseline | null = estimate && estimate.verdict === 'usable' ? baselineOf(estimate) : null;
    await this.step(seen, 'keep', user, seen.trial?.sentence ?? null, async (_, manager) => {
      if (baseline) await manager.update(Axis, seen.axisId, { baseline, baselineAt: new Date() });
    });
    tell(this.emitter, 'axis.changed', { axisId: seen.axisId, siteId: seen.siteId });
  }

  /** A window that closed without an applied change ends the proposal. */
  @Interval(5_000)
  async expire(): Promise<void> {
    const late = await this.dataSource
      .getRepository(Proposal)
      .findBy({ state: 'scheduled', windowTo: LessThan(new Date()) });
    for (const proposal of late)
      await this.end(proposal, 'expired', 'The maintenance window closed without the change');
  }

  private async end(seen: Proposal, state: ProposalState, note: string): Promise<void> {
    const done = await this.transactions.run(async (manager) => {
      const proposal = await manager.findOneByOrFail(Proposal, { id: seen.id });
      if (proposal.state !== seen.state) return false;
      proposal.state = state;
      await manager.save(proposal);
      await this.steps.note(manager, proposal, state, note, null);
      return true;
    });
    if (done) this.changed(seen);
  }

  /** Takes the step unless the proposal has changed since it was seen. */
  private async step(
    seen: Proposal,
    step: Exclude<Step, 'apply' | 'roll-back'>,
    user: SignedInUser,
    note: string | null,
    change?: (proposal: Proposal, manager: EntityManager) => unknown,
  ): Promise<void> {
    await this.transactions.run(async (manager) => {
      const proposal = await manager.findOneByOrFail(Proposal, { id: seen.id });
      if (proposal.version !== seen.version || proposal.state !== seen.state)
        throw new ConflictException(
          `Proposal ${seen.id} has changed meanwhile: it is ${proposal.state}, version ${proposal.version}`,
        );
      const before = stateOf(proposal);
      proposal.state = STEP[step].to ?? proposal.state;
      await change?.(proposal, manager);
      await manager.save(proposal);
      await this.steps.note(manager, proposal, DONE[step], note, user, {}, before);
    });
    this.changed(seen);
  }

  private changed({ id, axisId, siteId }: Proposal): void {
    tell(this.emitter, 'proposal.changed', { proposalId: id, axisId, siteId });
  }
}

/** Why a person may not take a step now; null when they may. */
export function refusalOf(proposal: Proposal, step: Step, user: SignedInUser): HttpException | null {
  const { from, right } = STEP[step];
  if (!may(user, proposal.siteId, right))
    return new ForbiddenException(`Your role on this site may not do this (${right})`);
  if (!from.includes(proposal.state))
    return new ConflictException(
      `The proposal is ${proposal.state}; this takes one that is ${from.join(' or ')}`,
    );
  if (step === 'submit' && !proposal.proposed)
    return new ConflictException('There are no gains to review: nothing within the limits was found');
  if (step === 'approve' && (proposal.alteredById === user.id || proposal.submittedById === user.id))
    return new ForbiddenException('Whoever prepared a proposal cannot approve it; somebody else must');
  return null;
}

/** @throws ForbiddenException or ConflictException when the step is not allowed, or the version is not the present one */
export function allow(proposal: Proposal, step: Step, user: SignedInUser, ifMatch: string | undefined): void {
  const refusal = refusalOf(proposal, step, user);
  if (refusal) throw refusal;
  if (ifMatch !== undefined && ifMatch.replaceAll('"', '') !== String(proposal.version))
    throw new ConflictException(
      `You saw version ${ifMatch}; it is version ${proposal.version} now: ${proposal.events.at(-1)?.action ?? 'changed'} by ${proposal.events.at(-1)?.by ?? 'somebody'}`,
    );
}
