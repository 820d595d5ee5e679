import { Injectable, Logger } from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, LessThan, type DataSource } from 'typeorm';
import { AuthService } from '../auth/auth.service.js';
import type { Gains } from '../control/pole-placement.js';
import { Transactions } from '../database/transactions.js';
import { tell, type Events } from '../events.js';
import { Axis } from '../fleet/axis.entity.js';
import { baselineOf } from '../fleet/axes.service.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import { TelemetryGateway } from '../telemetry/telemetry.gateway.js';
import { ProposalMailService } from './proposal-mail.service.js';
import { Proposal, ProposalEvent } from './proposal.entity.js';
import { StepRecorder } from './step-recorder.js';
import { ASKED_BACK } from './steps.js';

/** A gateway that has not read the gains back after this time, ms, has not applied them. */
const READ_BACK_WITHIN = 15_000;
const GAIN_NAMES = ['kp', 'ki', 'kd', 'kv', 'ka'] as const;

/**
 * Believes what a machine reads back and nothing else, also across a crash of the service.
 *
 * An order leaves once. Whatever keeps its read-back from coming (a mismatch, silence, a gateway that greets anew, a
 * restart of the service) makes it "not applied": the proposal says so, and the gains of the running revision are asked
 * for, again and again, until the machine reads those back.
 */
@Injectable()
export class ReadBackService {
  private readonly log = new Logger(ReadBackService.name);
  /** When the running gains were last asked for, ms, by axis. */
  private readonly askedAt = new Map<number, number>();

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly auth: AuthService,
    private readonly steps: StepRecorder,
    private readonly mail: ProposalMailService,
    private readonly gateway: TelemetryGateway,
    private readonly emitter: EventEmitter2,
  ) {}

  @OnEvent('gains.read-back')
  async readBack({ axisId, revision, gains }: Events['gains.read-back']): Promise<void> {
    const proposal = await this.dataSource.getRepository(Proposal).findOne({
      where: { axisId, state: 'applying', revision },
      relations: { axis: true },
    });
    if (!proposal) return this.readBackOfRunning(axisId, revision, gains);
    const sent = proposal.rollingBack ? proposal.current.gains : proposal.proposed!.gains;
    const other = difference(sent, gains);
    if (other) return this.notApplied(proposal.id, `The machine read back other gains: ${other}`);
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
      await this.steps.note(manager, proposal, 'applied', 'The machine read the same gains back', null);
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
      await this.steps.note(manager, proposal, 'rolled back', 'The machine read the former gains back', null);
      return true;
    });
    if (done) this.tuned(seen);
  }

  /** Gains that were not read back count as not applied; those of the running revision are asked for again. */
  async notApplied(id: number, why: string): Promise<void> {
    const proposal = await this.transactions.run(async (manager) => {
      const found = await manager.findOneByOrFail(Proposal, { id });
      if (found.state !== 'applying') return null;
      Object.assign(found, {
        state: found.rollingBack ? 'on trial' : 'scheduled',
        sentAt: null,
        restoring: true,
      } satisfies Partial<Proposal>);
      await manager.save(found);
      const event = await this.steps.note(manager, found, 'not applied', why, null);
      await this.mail.notApplied(manager, found, event.id, why);
      return found;
    });
    if (!proposal) return;
    this.changed(proposal);
    await this.askForRunning(proposal.axisId);
  }

  /** The machine runs with what the axis's revision says: sent as often as it takes, it stays the same revision. */
  private async askForRunning(axisId: number): Promise<void> {
    const axis = await this.dataSource.getRepository(Axis).findOneByOrFail({ id: axisId });
    const running = await this.dataSource
      .getRepository(TuningRevision)
      .findOneByOrFail({ axisId, revision: axis.revision });
    this.askedAt.set(axisId, Date.now());
    this.gateway.sendGains(axisId, running.revision, running.gains, running.structure);
  }

  private async readBackOfRunning(axisId: number, revision: number, gains: Gains): Promise<void> {
    const proposals = this.dataSource.getRepository(Proposal);
    const restoring = await proposals.findOneBy({ axisId, restoring: true });
    const running = await this.dataSource.getRepository(TuningRevision).findOneBy({ axisId, revision });
    const axis = await this.dataSource.getRepository(Axis).findOneByOrFail({ id: axisId });
    if (!restoring || !running || axis.revision !== revision)
      return this.log.log(`Axis ${axisId} read back revision ${revision}, which nobody waits for`);
    const other = difference(running.gains, gains);
    const done = await this.transactions.run(async (manager) => {
      const found = await manager.findOneByOrFail(Proposal, { id: restoring.id });
      if (!found.restoring) return false;
      if (other) {
        // Asked for again and again: the same refusal is written down once.
        const last = await manager.findOne(ProposalEvent, {
          where: { proposalId: found.id },
          order: { id: 'DESC' },
        });
        if (last?.action === NOT_RESTORED) return false;
        const event = await this.steps.note(manager, found, NOT_RESTORED, `It read back ${other}`, null);
        await this.mail.notApplied(
          manager,
          found,
          event.id,
          `The machine does not take its gains back: ${other}`,
        );
        return true;
      }
      found.restoring = false;
      await manager.save(found);
      await this.steps.note(
        manager,
        found,
        'gains restored',
        `The machine read revision ${revision} back`,
        null,
      );
      return true;
    });
    if (done) this.changed(restoring);
  }

  /** Silence after sending, also across a restart of the service. */
  @Interval(1_000)
  async giveUpOnSilence(): Promise<void> {
    const silent = await this.dataSource
      .getRepository(Proposal)
      .findBy({ state: 'applying', sentAt: LessThan(new Date(Date.now() - READ_BACK_WITHIN)) });
    for (const { id } of silent) await this.notApplied(id, 'The machine did not read the gains back in time');
    const restoring = await this.dataSource.getRepository(Proposal).findBy({ restoring: true });
    for (const { axisId } of restoring)
      if (this.gateway.serves(axisId) && Date.now() - (this.askedAt.get(axisId) ?? 0) > READ_BACK_WITHIN)
        await this.askForRunning(axisId);
  }

  /**
   * A gateway that greets anew was answered with the gains of the running revision: what was on its way before is void,
   * and a late read-back of it says nothing about what the machine runs with from now on.
   */
  @OnEvent('gateway.greeted')
  async greeted({ axisIds }: Events['gateway.greeted']): Promise<void> {
    const proposals = this.dataSource.getRepository(Proposal);
    for (const { id } of await proposals.findBy({ axisId: In(axisIds), state: 'applying' }))
      await this.notApplied(id, 'The gateway was lost before it read the gains back');
    for (const { axisId } of await proposals.findBy({ axisId: In(axisIds), restoring: true }))
      if (Date.now() - (this.askedAt.get(axisId) ?? 0) > 1_000) await this.askForRunning(axisId);
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

const NOT_RESTORED = 'gains not restored';

/** Which gains differ in the bits of their float32, in words; empty when none does. */
const difference = (sent: Gains, read: Gains): string =>
  GAIN_NAMES.filter((name) => Math.fround(sent[name]) !== Math.fround(read[name]))
    .map((name) => `${name} ${read[name]} instead of ${sent[name]}`)
    .join(', ');

/** Whether a proposal still waits for the read-back that was seen: the same one may come twice, or silence be given up. */
const isWaiting = (now: Proposal, seen: Proposal): boolean =>
  now.state === 'applying' && now.revision === seen.revision;
