import {
  BadRequestException,
  ConflictException,
  ForbiddenException,
  Injectable,
  Logger,
} from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { IsNull, LessThan, Not, type DataSource, type EntityManager } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { AuthService } from '../auth/auth.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import type { Gains } from '../control/pole-placement.js';
import { Transactions } from '../database/transactions.js';
import { tell, type Events } from '../events.js';
import { Axis } from '../fleet/axis.entity.js';
import { baselineOf } from '../fleet/axes.service.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { TelemetryGateway } from '../telemetry/telemetry.gateway.js';
import { CHECKLIST, missingFrom } from './checklist.js';
import { Proposal, ProposalEvent } from './proposal.entity.js';
import { allow, ReviewService } from './review.service.js';
import { STEP } from './steps.js';

/** A gateway that has not read the gains back after this time, ms, has not applied them. */
const READ_BACK_WITHIN = 15_000;
const ASKED_BACK = 'roll-back asked for';
const GAIN_NAMES = ['kp', 'ki', 'kd', 'kv', 'ka'] as const;

/**
 * Sends gains to a machine and believes only what it reads back.
 *
 * The order is: write down what will be sent, send it once, compare the read-back with it to the bit of its float32.
 * A mismatch or silence counts as not applied; then the former gains are asked for again.
 */
@Injectable()
export class ApplyService {
  private readonly log = new Logger(ApplyService.name);

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly auth: AuthService,
    private readonly review: ReviewService,
    private readonly intake: IntakeService,
    private readonly gateway: TelemetryGateway,
    private readonly emitter: EventEmitter2,
  ) {}

  /**
   * Sends the approved gains, in the maintenance window, to an axis in maintenance and at rest.
   *
   * @throws BadRequestException naming what the checklist lacks; ForbiddenException for a wrong password;
   * ConflictException for everything that the axis or the window does not allow
   */
  async apply(
    id: number,
    checklist: Record<string, unknown>,
    password: string,
    ifMatch: string | undefined,
    user: SignedInUser,
  ): Promise<void> {
    const seen = await this.review.get(id, user);
    allow(seen, 'apply', user, ifMatch);
    const missing = missingFrom(checklist);
    if (missing.length > 0)
      throw new BadRequestException({
        errors: missing.map((key) => ({
          path: `checklist.${key}`,
          message: `must be confirmed: ${CHECKLIST.find((item) => item.key === key)!.text}`,
        })),
      });
    if (!(await this.auth.passwordIsOf(user.id, password)))
      throw new ForbiddenException('The password is not yours. Nothing was sent');
    if (seen.approvedVersion !== seen.version)
      throw new ConflictException(`Version ${seen.version} is not approved. Nothing was sent`);
    const now = new Date();
    if (!seen.windowFrom || !seen.windowTo || now < seen.windowFrom || now > seen.windowTo)
      throw new ConflictException('The maintenance window is not open now. Nothing was sent');
    this.requireAtRest(seen.axis);
    await this.send(seen, user, false, 'apply', seen.proposed!.gains);
  }

  /** Asks for the former gains again: one step for whoever stands at the machine. */
  async rollBack(id: number, reason: string, ifMatch: string | undefined, user: SignedInUser): Promise<void> {
    const seen = await this.review.get(id, user);
    allow(seen, 'roll-back', user, ifMatch);
    this.requireAtRest(seen.axis);
    await this.send(seen, user, true, reason, seen.current.gains);
  }

  /** @throws ConflictException saying what is missing */
  private requireAtRest(axis: Axis): void {
    if (!axis.inMaintenance)
      throw new ConflictException(
        `${axis.tag} is in production. Put it in maintenance first; nothing was sent`,
      );
    if (!this.gateway.serves(axis.id))
      throw new ConflictException(`No gateway serves ${axis.tag} now. Nothing was sent`);
    if (!this.intake.pipeline(axis.id)?.standing)
      throw new ConflictException(`${axis.tag} is not at rest yet. Nothing was sent`);
  }

  private async send(
    seen: Proposal,
    user: SignedInUser,
    rollingBack: boolean,
    why: string,
    gains: Gains,
  ): Promise<void> {
    const structure = rollingBack ? seen.current.structure : seen.proposed!.structure;
    const revision = await this.transactions.run(async (manager) => {
      const proposal = await manager.findOneByOrFail(Proposal, { id: seen.id });
      if (proposal.state !== seen.state || proposal.version !== seen.version)
        throw new ConflictException(
          `Proposal ${seen.id} has changed meanwhile: it is ${proposal.state}. Nothing was sent`,
        );
      const next = await this.nextRevision(manager, seen.axisId);
      Object.assign(proposal, {
        state: STEP.apply.to,
        revision: next,
        sentAt: new Date(),
        rollingBack,
        ...(!rollingBack && { appliedById: user.id }),
      });
      await manager.save(proposal);
      await this.note(
        manager,
        proposal,
        user.name,
        rollingBack ? ASKED_BACK : 'gains sent',
        rollingBack ? why : `Checklist confirmed; revision ${next} sent to the machine`,
        user,
      );
      return next;
    });
    this.changed(seen);
    if (!this.gateway.sendGains(seen.axisId, revision, gains, structure))
      await this.notApplied(seen.id, 'The gateway was lost before the gains could be sent');
  }

  /** Revisions count up and are never used again, also those that a machine refused. */
  private async nextRevision(manager: EntityManager, axisId: number): Promise<number> {
    const largest = async (entity: typeof Proposal | typeof TuningRevision): Promise<number> => {
      const [row] = await manager.find<Proposal | TuningRevision>(entity, {
        select: { revision: true },
        where: { axisId, revision: Not(IsNull()) },
        order: { revision: 'DESC' },
        take: 1,
      });
      return row?.revision ?? 0;
    };
    return Math.max(await largest(Proposal), await largest(TuningRevision)) + 1;
  }

  @OnEvent('gains.read-back')
  async readBack({ axisId, revision, gains }: Events['gains.read-back']): Promise<void> {
    const proposal = await this.dataSource.getRepository(Proposal).findOne({
      where: { axisId, state: 'applying', revision },
      relations: { axis: true },
    });
    if (!proposal)
      return this.log.log(`Axis ${axisId} read back revision ${revision}, which nobody waits for`);
    const sent = proposal.rollingBack ? proposal.current.gains : proposal.proposed!.gains;
    const wrong = GAIN_NAMES.filter((name) => Math.fround(sent[name]) !== Math.fround(gains[name]));
    if (wrong.length > 0)
      return this.notApplied(
        proposal.id,
        `The machine read back other gains: ${wrong.map((name) => `${name} ${gains[name]} instead of ${sent[name]}`).join(', ')}`,
      );
    if (proposal.rollingBack) await this.rolledBack(proposal);
    else await this.applied(proposal);
  }

  private async applied(seen: Proposal): Promise<void> {
    const proposed = seen.proposed!;
    const plant = baselineOf(seen.evidence.estimate);
    const done = await this.transactions.run(async (manager) => {
      const proposal = await manager.findOneByOrFail(Proposal, { id: seen.id });
      if (!isWaiting(proposal, seen)) return false;
      const now = new Date();
      const person = await this.auth.nameOf(seen.appliedById);
      await manager.save(TuningRevision, {
        axisId: seen.axisId,
        revision: seen.revision!,
        ...proposed,
        plant,
        source: 'proposal',
        proposalId: seen.id,
        appliedAt: now,
        appliedBy: person,
        note: seen.note,
      });
      await manager.update(Axis, seen.axisId, {
        revision: seen.revision!,
        structure: proposed.structure,
        feedForward: proposed.feedForward,
        ...(proposed.pattern && { pattern: proposed.pattern }),
        baseline: plant,
        baselineAt: now,
      });
      Object.assign(proposal, {
        state: 'on trial',
        appliedAt: now,
        trial: {
          startedAt: now.toISOString(),
          moves: { before: 0, after: 0 },
          peakFollowingError: null,
          rmsFollowingError: null,
          saturatedPct: null,
          verdict: 'waiting',
          sentence: 'Waiting for production moves with the new gains.',
        },
      } satisfies Partial<Proposal>);
      await manager.save(proposal);
      await this.note(manager, proposal, 'service', 'applied', 'The machine read the same gains back', null);
      return true;
    });
    if (done) this.tuned(seen);
  }

  private async rolledBack(seen: Proposal): Promise<void> {
    const done = await this.transactions.run(async (manager) => {
      const proposal = await manager.findOneByOrFail(Proposal, { id: seen.id });
      if (!isWaiting(proposal, seen)) return false;
      const now = new Date();
      const asked = await manager.findOneOrFail(ProposalEvent, {
        where: { proposalId: seen.id, action: ASKED_BACK },
        order: { id: 'DESC' },
      });
      const former = await manager.findOneByOrFail(TuningRevision, {
        axisId: seen.axisId,
        revision: seen.current.revision,
      });
      await manager.save(TuningRevision, {
        axisId: seen.axisId,
        revision: seen.revision!,
        structure: former.structure,
        pattern: former.pattern,
        feedForward: former.feedForward,
        gains: former.gains,
        plant: former.plant,
        source: 'roll-back',
        proposalId: seen.id,
        appliedAt: now,
        appliedBy: asked.by,
        note: `Back to revision ${former.revision}`,
      });
      await manager.update(Axis, seen.axisId, {
        revision: seen.revision!,
        structure: former.structure,
        feedForward: former.feedForward,
        ...(former.pattern && { pattern: former.pattern }),
        baseline: seen.evidence.baseline,
        baselineAt: now,
      });
      proposal.state = 'rolled back';
      await manager.save(proposal);
      await this.note(
        manager,
        proposal,
        'service',
        'rolled back',
        'The machine read the former gains back',
        null,
      );
      return true;
    });
    if (done) this.tuned(seen);
  }

  /** Gains that were not read back count as not applied; the former ones are asked for again. */
  private async notApplied(id: number, why: string): Promise<void> {
    const proposal = await this.transactions.run(async (manager) => {
      const found = await manager.findOneByOrFail(Proposal, { id });
      if (found.state !== 'applying') return null;
      found.state = found.rollingBack ? 'on trial' : 'scheduled';
      found.sentAt = null;
      await manager.save(found);
      await this.note(manager, found, 'service', 'not applied', why, null);
      return found;
    });
    if (!proposal) return;
    const axis = await this.dataSource.getRepository(Axis).findOneByOrFail({ id: proposal.axisId });
    const running = await this.dataSource
      .getRepository(TuningRevision)
      .findOneByOrFail({ axisId: axis.id, revision: axis.revision });
    this.gateway.sendGains(axis.id, running.revision, running.gains, running.structure);
    this.changed(proposal);
  }

  /** Silence after sending, also across a restart of the service. */
  @Interval(1_000)
  async giveUpOnSilence(): Promise<void> {
    const silent = await this.dataSource
      .getRepository(Proposal)
      .findBy({ state: 'applying', sentAt: LessThan(new Date(Date.now() - READ_BACK_WITHIN)) });
    for (const { id } of silent) await this.notApplied(id, 'The machine did not read the gains back in time');
  }

  private async note(
    manager: EntityManager,
    proposal: Proposal,
    by: string,
    action: string,
    note: string | null,
    user: SignedInUser | null,
  ): Promise<void> {
    await manager.save(ProposalEvent, {
      proposalId: proposal.id,
      at: new Date(),
      by,
      action,
      note,
      version: proposal.version,
    });
    await this.audit.record(manager, {
      user,
      action: `proposal.${action.replaceAll(' ', '-')}`,
      subject: { type: 'proposal', id: proposal.id },
      siteId: proposal.siteId,
      note,
      after: {
        state: proposal.state,
        revision: proposal.revision,
        gains: proposal.rollingBack ? proposal.current.gains : proposal.proposed?.gains,
      },
    });
  }

  private tuned(seen: Proposal): void {
    tell(this.emitter, 'axis.changed', { axisId: seen.axisId, siteId: seen.siteId });
    tell(this.emitter, 'tuning.applied', {
      axisId: seen.axisId,
      siteId: seen.siteId,
      revision: seen.revision!,
    });
    this.changed(seen);
  }

  private changed({ id, axisId, siteId }: Proposal): void {
    tell(this.emitter, 'proposal.changed', { proposalId: id, axisId, siteId });
  }
}

/** Whether a proposal still waits for the read-back that was seen: the same one may come twice, or silence be given up. */
const isWaiting = (now: Proposal, seen: Proposal): boolean =>
  now.state === 'applying' && now.revision === seen.revision;
