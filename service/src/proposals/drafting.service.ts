import { ConflictException, Injectable } from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, type DataSource } from 'typeorm';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { bindingOf } from '../control/binding.js';
import {
  checkGains,
  checkPattern,
  placeGains,
  type Gains,
  type PolePattern,
  type Structure,
} from '../control/pole-placement.js';
import { Transactions } from '../database/transactions.js';
import { tell, type Events } from '../events.js';
import { AxesService } from '../fleet/axes.service.js';
import { Axis } from '../fleet/axis.entity.js';
import { causeBetween } from '../fleet/cause-of.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import type { AxisPipeline } from '../telemetry/axis-pipeline.js';
import { IntakeService } from '../telemetry/intake.service.js';
import {
  decisionSentence,
  expectedOf,
  lambdaOf,
  plantOf,
  recommend,
  type CurrentTuning,
  type Evidence,
} from './evidence.js';
import { LIVE_STATES, Proposal, type Proposed } from './proposal.entity.js';
import { StepRecorder } from './step-recorder.js';

/** What a person wants altered; what is absent stays. */
export interface Alteration {
  structure?: Structure;
  pattern?: PolePattern;
  feedForward?: boolean;
  /** Given by hand instead of placed. */
  gains?: Gains;
  note?: string;
}

/** A draft that nobody touched follows the estimate when it has moved by more than this share. */
const REFRESH_BEYOND = 0.02;
/** After a proposal ended, the same drift is not proposed again for this long, ms, unless it went on. */
const QUIET_AFTER_END = 12 * 3_600_000;
const SAME_DRIFT = 0.05;

/** Makes proposals: from decided drift by itself, or because an engineer asked. */
@Injectable()
export class DraftingService {
  private drafting = false;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly steps: StepRecorder,
    private readonly intake: IntakeService,
    private readonly axes: AxesService,
    private readonly recent: RecentSeconds,
    private readonly emitter: EventEmitter2,
  ) {}

  /** Looks at the level, not the event, so that a decision made just before a crash is not lost. */
  @OnEvent('checkpoint.written')
  async lookForDrift({ at }: Events['checkpoint.written']): Promise<void> {
    if (this.drafting) return;
    this.drafting = true;
    try {
      const decided = this.intake.all().filter(isDecided);
      const live = await this.dataSource.getRepository(Proposal).findBy({ state: In([...LIVE_STATES]) });
      for (const pipeline of decided) {
        const proposal = live.find(({ axisId }) => axisId === pipeline.facts.id);
        if (!proposal) {
          if (!(await this.endedLately(pipeline, at))) await this.draft(pipeline.facts.id, 'drift', null, {});
        } else if (isStale(proposal, pipeline.estimate!)) await this.refresh(proposal, pipeline.estimate!);
      }
      for (const proposal of live)
        if (isUntouched(proposal) && isLifted(this.intake.pipeline(proposal.axisId)))
          await this.lift(proposal);
    } finally {
      this.drafting = false;
    }
  }

  /**
   * Drafts a proposal for an axis.
   *
   * @throws ConflictException when the axis has a live one, or nothing is known of its plant
   */
  async draft(
    axisId: number,
    source: 'drift' | 'person',
    user: SignedInUser | null,
    wish: Alteration,
  ): Promise<Proposal> {
    const axis = await this.dataSource.getRepository(Axis).findOneByOrFail({ id: axisId });
    const pipeline = this.intake.pipeline(axisId);
    const estimate = pipeline?.estimate;
    if (!pipeline || !estimate || estimate.verdict !== 'usable')
      throw new ConflictException(
        'Nothing usable is known of this axis’s plant yet; let it make some production moves',
      );
    if (!axis.baseline) throw new ConflictException('The axis has no baseline yet; confirm one first');
    const current = await this.currentOf(axis);
    const evidence = await this.evidenceOf(axis, pipeline, estimate);
    const worked = this.work(axis, estimate, current, {
      structure: wish.structure ?? axis.structure,
      pattern: wish.pattern ?? axis.pattern,
      feedForward: wish.feedForward ?? axis.feedForward,
      ...(wish.gains && { gains: wish.gains }),
    });
    const proposal = await this.transactions.run(async (manager) => {
      if (await manager.existsBy(Proposal, { axisId, state: In([...LIVE_STATES]) }))
        throw new ConflictException('This axis already has an open proposal');
      const saved = await manager.save(Proposal, {
        siteId: axis.siteId,
        axisId,
        state: 'drafted',
        version: 1,
        source,
        evidence,
        probableCause: source === 'drift' ? causeBetween(axis.baseline!, estimate) : null,
        current,
        ...worked,
        note: wish.note ?? null,
        alteredById: user?.id ?? null,
      });
      const why = wish.note ?? (evidence.decisions.map(({ sentence }) => sentence).join(' ') || null);
      await this.steps.note(manager, saved as Proposal, 'drafted', why, user, { axis: axis.tag, source });
      return saved;
    });
    tell(this.emitter, 'proposal.changed', { proposalId: proposal.id, axisId, siteId: axis.siteId });
    return proposal;
  }

  /** Gains, expected moves and what binds, for the wanted poles or the given gains, on the frozen estimate. */
  work(
    axis: Axis,
    estimate: PlantEstimate,
    current: CurrentTuning,
    wanted: {
      structure: Structure;
      pattern: PolePattern;
      feedForward: boolean;
      gains?: Gains;
      exactly?: boolean;
    },
  ): Pick<Proposal, 'proposed' | 'noGainsReason' | 'expected' | 'binding'> {
    const { structure, pattern, feedForward, gains, exactly } = wanted;
    checkPattern(pattern);
    const recommendation = recommend(axis, estimate, { structure, pattern, feedForward });
    let proposed: Proposed | null = null;
    if (gains) {
      checkGains(gains);
      proposed = { structure, pattern: null, feedForward, gains };
    } else if (exactly) {
      // A person chose these poles; the limits are shown, not enforced.
      proposed = {
        structure,
        pattern,
        feedForward,
        gains: placeGains(plantOf(estimate), structure, pattern, feedForward),
      };
    } else if (recommendation.gains && recommendation.pattern)
      proposed = { structure, pattern: recommendation.pattern, feedForward, gains: recommendation.gains };
    const binding = bindingOf(recommendation);
    return {
      proposed,
      noGainsReason: proposed ? null : [recommendation.reason, ...recommendation.waysOut].join(' '),
      expected: expectedOf(axis, estimate, current, proposed),
      binding:
        proposed?.pattern && exactly
          ? { ...binding, lambda: lambdaOf(pattern), kept: lambdaOf(pattern) === lambdaOf(axis.pattern) }
          : binding,
    };
  }

  async currentOf(axis: Axis): Promise<CurrentTuning> {
    const tuning = await this.dataSource
      .getRepository(TuningRevision)
      .findOneByOrFail({ axisId: axis.id, revision: axis.revision });
    return {
      revision: tuning.revision,
      structure: tuning.structure,
      pattern: tuning.pattern,
      lambda: lambdaOf(tuning.pattern),
      feedForward: tuning.feedForward,
      gains: tuning.gains,
    };
  }

  private async evidenceOf(axis: Axis, pipeline: AxisPipeline, estimate: PlantEstimate): Promise<Evidence> {
    const minute = this.recent.over(axis.id);
    const { decisions } = pipeline;
    return {
      at: new Date().toISOString(),
      baseline: axis.baseline!,
      estimate,
      tolerances: axis.tolerances,
      move: axis.move,
      trail: (await this.axes.trailOf(axis)).slice(-24),
      indicators: minute && {
        peakFollowingError: minute.peakFollowingError,
        rmsFollowingError: minute.rmsFollowingError,
        saturatedPct: minute.saturatedPct,
      },
      decisions: (decisions ? [decisions.gain, decisions.pole] : [])
        .filter(({ state }) => state === 'drifted')
        .map((decision) => ({
          quantity: decision.quantity,
          sentence: decisionSentence(decision, axis.baseline!, estimate, axis.tolerances),
        })),
    };
  }

  /** A draft that nobody has touched follows the evidence. */
  private async refresh(proposal: Proposal, estimate: PlantEstimate): Promise<void> {
    const axis = await this.dataSource.getRepository(Axis).findOneByOrFail({ id: proposal.axisId });
    const pipeline = this.intake.pipeline(axis.id)!;
    const evidence = await this.evidenceOf(axis, pipeline, estimate);
    const worked = this.work(axis, estimate, proposal.current, {
      structure: axis.structure,
      pattern: axis.pattern,
      feedForward: axis.feedForward,
    });
    const done = await this.transactions.run(async (manager) => {
      const fresh = await manager.findOneByOrFail(Proposal, { id: proposal.id });
      if (fresh.version !== proposal.version || fresh.state !== 'drafted') return false;
      await manager.save(
        Object.assign(fresh, worked, {
          version: fresh.version + 1,
          evidence,
          probableCause: causeBetween(axis.baseline!, estimate),
        }),
      );
      const why = evidence.decisions.map(({ sentence }) => sentence).join(' ') || null;
      await this.steps.note(manager, fresh, 'newer evidence', why, null);
      return true;
    });
    if (done)
      tell(this.emitter, 'proposal.changed', {
        proposalId: proposal.id,
        axisId: axis.id,
        siteId: axis.siteId,
      });
  }

  /** Drift that went away by itself takes its untouched draft along. */
  private async lift(seen: Proposal): Promise<void> {
    const done = await this.transactions.run(async (manager) => {
      const proposal = await manager.findOneByOrFail(Proposal, { id: seen.id });
      if (proposal.version !== seen.version || !isUntouched(proposal)) return false;
      proposal.state = 'withdrawn';
      await manager.save(proposal);
      await this.steps.note(manager, proposal, 'withdrawn', 'The plant is back within tolerance.', null);
      return true;
    });
    if (done)
      tell(this.emitter, 'proposal.changed', {
        proposalId: seen.id,
        axisId: seen.axisId,
        siteId: seen.siteId,
      });
  }

  private async endedLately({ facts, estimate }: AxisPipeline, at: Date): Promise<boolean> {
    const last = await this.dataSource.getRepository(Proposal).findOne({
      where: { axisId: facts.id, source: 'drift' },
      order: { id: 'DESC' },
      relations: { events: true },
    });
    if (!last) return false;
    const ended = Math.max(...last.events.map((event) => event.at.getTime()));
    return at.getTime() - ended < QUIET_AFTER_END && !hasMoved(last.evidence.estimate, estimate!, SAME_DRIFT);
  }
}

function isDecided({ decisions, estimate, facts }: AxisPipeline): boolean {
  const drifted = decisions?.gain.state === 'drifted' || decisions?.pole.state === 'drifted';
  return (
    drifted && estimate !== null && facts.baseline !== null && !facts.inMaintenance && facts.revision > 0
  );
}

/** Made by the service and not yet looked at by anybody. */
const isUntouched = ({ state, source, alteredById }: Proposal): boolean =>
  state === 'drafted' && source === 'drift' && alteredById === null;

const isStale = (proposal: Proposal, estimate: PlantEstimate): boolean =>
  isUntouched(proposal) && hasMoved(proposal.evidence.estimate, estimate, REFRESH_BEYOND);

/** Whether the chart has taken its decision back; while nothing is known, nothing is taken back. */
const isLifted = (pipeline: AxisPipeline | undefined): boolean =>
  pipeline !== undefined &&
  pipeline.decisions !== null &&
  !pipeline.facts.inMaintenance &&
  pipeline.decisions.gain.state !== 'drifted' &&
  pipeline.decisions.pole.state !== 'drifted';

const hasMoved = (before: PlantEstimate, now: PlantEstimate, share: number): boolean =>
  Math.abs(now.gain.value / before.gain.value - 1) > share ||
  Math.abs(now.pole.value / before.pole.value - 1) > share;
