import { BadRequestException, ConflictException, ForbiddenException, Injectable } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { IsNull, Not, type DataSource, type EntityManager } from 'typeorm';
import { AuthService } from '../auth/auth.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import type { Gains } from '../control/pole-placement.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import type { Axis } from '../fleet/axis.entity.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { TelemetryGateway } from '../telemetry/telemetry.gateway.js';
import { missingFrom, type ChecklistItem } from './checklist.js';
import { ChecklistService } from './checklist.service.js';
import { Proposal } from './proposal.entity.js';
import { ReadBackService } from './read-back.service.js';
import { allow, ReviewService } from './review.service.js';
import { StepRecorder } from './step-recorder.js';
import { ASKED_BACK, STEP } from './steps.js';

/**
 * Sends gains to a machine: first what will be sent is written down, then it leaves, once. Whether it was applied is for
 * `ReadBackService` to say.
 */
@Injectable()
export class ApplyService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly auth: AuthService,
    private readonly review: ReviewService,
    private readonly intake: IntakeService,
    private readonly checklists: ChecklistService,
    private readonly readBacks: ReadBackService,
    private readonly steps: StepRecorder,
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
    const items = await this.checklists.of(seen.siteId);
    const missing = missingFrom(items, checklist);
    if (missing.length > 0)
      throw new BadRequestException({
        errors: missing.map(({ key, text }) => ({
          path: `checklist.${key}`,
          message: `must be confirmed: ${text}`,
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
    await this.send(seen, user, false, 'apply', seen.proposed!.gains, items);
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
    confirmed: readonly ChecklistItem[] = [],
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
        restoring: false,
        rollingBack,
        ...(!rollingBack && { appliedById: user.id }),
      });
      await manager.save(proposal);
      // Other gains are on their way: those asked for before are wanted no more.
      await manager.update(Proposal, { axisId: seen.axisId, restoring: true }, { restoring: false });
      await this.steps.note(
        manager,
        proposal,
        rollingBack ? ASKED_BACK : 'gains sent',
        rollingBack ? why : `Checklist confirmed; revision ${next} sent to the machine`,
        user,
        ...(confirmed.length > 0 ? [{ checklist: confirmed }] : []),
      );
      return next;
    });
    tell(this.emitter, 'proposal.changed', { proposalId: seen.id, axisId: seen.axisId, siteId: seen.siteId });
    if (!this.gateway.sendGains(seen.axisId, revision, gains, structure))
      await this.readBacks.notApplied(seen.id, 'The gateway was lost before the gains could be sent');
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
}
