import { BadRequestException, ConflictException, Injectable, NotFoundException } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, Not, type DataSource } from 'typeorm';
import { Alert } from '../alerts/alert.entity.js';
import { AuditService } from '../audit/audit.service.js';
import type { Action } from '../auth/policy.js';
import { requireRole, sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { checkPattern, patternFrequency, placeGains, type PolePattern } from '../control/pole-placement.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import { LIVE_STATES, Proposal } from '../proposals/proposal.entity.js';
import { AxesAtHand } from '../telemetry/axes-at-hand.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { TelemetryGateway } from '../telemetry/telemetry.gateway.js';
import { groupBy } from '../group-by.js';
import { Axis, AXIS_STATES, type Baseline } from './axis.entity.js';
import type { FleetSummaryDto } from './dto/fleet.dto.js';
import type { AxisDto, AxisQuery } from './dto/axis.dto.js';
import type { AxisEstimateDto, RatioPointDto } from './dto/axis-estimate.dto.js';
import type { ChangeAxisDto, CreateAxisDto } from './dto/axis-sheet.dto.js';
import type { MaintenanceDto } from './dto/axis-care.dto.js';
import { Machine } from './machine.entity.js';
import { TuningRevision } from './tuning-revision.entity.js';

/** Points of a drift plot's trail, and how far it reaches back, s. */
const TRAIL_POINTS = 24;
const TRAIL_REACH = 30 * 86_400;
const TRAIL_STEP = TRAIL_REACH / TRAIL_POINTS;

interface PlantPoint {
  gain: number;
  pole: number;
}

/** Order of the fleet: what needs a person first. */
const WORST_FIRST = ['out-of-tune', 'drifting', 'no-signal', 'in-maintenance', 'in-tune'];

@Injectable()
export class AxesService {
  /** Newest estimate of an axis in a stretch of its trail, by axis and stretch; null where there is none. */
  private readonly trailPoints = new Map<number, Map<number, PlantPoint | null>>();

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly intake: IntakeService,
    private readonly gateway: TelemetryGateway,
    private readonly recent: RecentSeconds,
    private readonly axesAtHand: AxesAtHand,
    private readonly emitter: EventEmitter2,
  ) {}

  /** An axis that the person may see; what they may not see does not exist for them. */
  async get(id: number, user: SignedInUser, action: Action | 'see' = 'see'): Promise<Axis> {
    const axis = await this.dataSource
      .getRepository(Axis)
      .findOne({ where: { id }, relations: { machine: true, site: true } });
    if (!axis) throw new NotFoundException(`There is no axis ${id}`);
    requireRole(user, axis.siteId, action, `axis ${id}`);
    return axis;
  }

  /** The person's axes that fit the query, worst first. */
  async list(query: AxisQuery, user: SignedInUser): Promise<AxisDto[]> {
    const { siteId, machineId, state, actuator, q } = query;
    const sites = sitesOf(user).filter((id) => siteId === undefined || id === siteId);
    const text = q?.trim().toLowerCase();
    const found = (await this.axesAtHand.all()).filter(
      (axis) =>
        sites.includes(axis.siteId) &&
        (machineId === undefined || axis.machineId === machineId) &&
        (!state || axis.state === state) &&
        (!actuator || axis.actuator === actuator) &&
        (!text || `${axis.tag} ${axis.name} ${axis.machine.name}`.toLowerCase().includes(text)),
    );
    const dtos = await this.toDtos(found);
    return dtos.sort(
      (a, b) =>
        WORST_FIRST.indexOf(a.state) - WORST_FIRST.indexOf(b.state) ||
        worstDeviation(b) - worstDeviation(a) ||
        a.tag.localeCompare(b.tag),
    );
  }

  async toDto(axis: Axis): Promise<AxisDto> {
    return (await this.toDtos([axis]))[0]!;
  }

  /** Axes with everything a tile shows, in five queries however many there are. */
  private async toDtos(axes: readonly Axis[]): Promise<AxisDto[]> {
    if (axes.length === 0) return [];
    const ids = axes.map(({ id }) => id);
    const [alerts, proposals, tunings, trails] = await Promise.all([
      this.dataSource.getRepository(Alert).findBy({ axisId: In(ids), state: Not('normal') }),
      this.dataSource.getRepository(Proposal).find({
        select: { id: true, axisId: true, state: true },
        where: { axisId: In(ids), state: In([...LIVE_STATES]) },
      }),
      this.dataSource
        .getRepository(TuningRevision)
        .createQueryBuilder('tuning')
        .innerJoin(Axis, 'axis', 'axis.id = tuning.axisId AND axis.revision = tuning.revision')
        .where({ axisId: In(ids) })
        .getMany(),
      this.trails(axes),
    ]);
    const alertsOf = groupBy(alerts, ({ axisId }) => axisId);
    const tuningOf = new Map(tunings.map((tuning) => [tuning.axisId, tuning]));
    const proposalOf = new Map(proposals.map((proposal) => [proposal.axisId, proposal]));
    return axes.map((axis) => {
      const pipeline = this.intake.pipeline(axis.id);
      const tuning = tuningOf.get(axis.id);
      const indicators = this.recent.over(axis.id);
      const proposal = proposalOf.get(axis.id);
      const lastSampleAt = pipeline?.lastSampleAt ?? null;
      return {
        id: axis.id,
        tag: axis.tag,
        name: axis.name,
        siteId: axis.siteId,
        siteName: axis.site.name,
        timeZone: axis.site.timeZone,
        machineId: axis.machineId,
        machineName: axis.machine.name,
        actuator: axis.actuator,
        state: axis.state,
        stateReason: axis.stateReason,
        stateSince: axis.stateSince,
        baseline: axis.baseline && { gain: axis.baseline.gain, pole: axis.baseline.pole },
        baselineAt: axis.baselineAt,
        estimate: pipeline?.estimate ? estimateDto(pipeline.estimate, lastSampleAt ?? 0) : null,
        gains: tuning?.gains ?? null,
        structure: tuning?.structure ?? axis.structure,
        pattern: tuning?.pattern ?? axis.pattern,
        lambda: patternFrequency(tuning?.pattern ?? axis.pattern),
        feedForward: tuning?.feedForward ?? axis.feedForward,
        revision: axis.revision,
        tolerances: axis.tolerances,
        travel: axis.travel,
        move: axis.move,
        sampleTime: axis.sampleTime,
        resolution: axis.resolution,
        indicators: indicators && {
          peakFollowingError: indicators.peakFollowingError,
          rmsFollowingError: indicators.rmsFollowingError,
          saturatedPct: indicators.saturatedPct,
          at: indicators.at,
        },
        maintenance: axis.inMaintenance
          ? { until: axis.maintenanceUntil, reason: axis.maintenanceReason, by: axis.maintenanceBy }
          : null,
        trail: trails.get(axis.id) ?? [],
        openAlerts: (alertsOf.get(axis.id) ?? []).map(({ id, rule, priority, state }) => ({
          id,
          rule,
          priority,
          state,
        })),
        openProposal: proposal ? { id: proposal.id, state: proposal.state } : null,
        lastSampleAt: lastSampleAt === null ? null : new Date(lastSampleAt * 1000),
      };
    });
  }

  async trailOf(axis: Axis): Promise<RatioPointDto[]> {
    return (await this.trails([axis])).get(axis.id) ?? [];
  }

  /**
   * Former estimates over the baseline: of each of `TRAIL_POINTS` equal stretches of `TRAIL_REACH` the newest, one seek
   * in the index each. What was found is kept, but for the running stretch.
   */
  private async trails(axes: readonly Axis[]): Promise<Map<number, RatioPointDto[]>> {
    const running = Math.floor(Date.now() / 1000 / TRAIL_STEP);
    const stretches = Array.from({ length: TRAIL_POINTS }, (_, k) => running - TRAIL_POINTS + 1 + k);
    const wanted = axes.flatMap(({ id, baseline }) => {
      if (!baseline) return [];
      const known = this.trailPoints.get(id);
      return stretches.filter((k) => !known?.has(k)).map((k) => [id, k] as const);
    });
    const found = (await this.dataSource.query(
      `SELECT w."id", w."k", json_extract(e."estimate", '$.gain.value') AS "gain",
              json_extract(e."estimate", '$.pole.value') AS "pole"
       FROM (SELECT value ->> 0 AS "id", value ->> 1 AS "k" FROM json_each(?)) w
       JOIN "plant_estimate_row" e ON e."axisId" = w."id" AND e."t" = (
         SELECT max("t") FROM "plant_estimate_row"
         WHERE "axisId" = w."id" AND "t" >= w."k" * ${TRAIL_STEP} AND "t" < (w."k" + 1) * ${TRAIL_STEP})`,
      [JSON.stringify(wanted)],
    )) as { id: number; k: number; gain: number; pole: number }[];
    for (const [id, k] of wanted) {
      const points = this.trailPoints.get(id) ?? new Map<number, PlantPoint | null>();
      points.set(k, null);
      this.trailPoints.set(id, points);
    }
    for (const { id, k, gain, pole } of found) this.trailPoints.get(id)!.set(k, { gain, pole });
    const trails = new Map<number, RatioPointDto[]>();
    for (const { id, baseline } of axes) {
      const points = this.trailPoints.get(id);
      if (!baseline || !points) continue;
      for (const k of points.keys()) if (k < stretches[0]!) points.delete(k);
      const trail = stretches.flatMap((k) => {
        const point = points.get(k);
        return point
          ? [{ gainRatio: point.gain / baseline.gain, poleRatio: point.pole / baseline.pole }]
          : [];
      });
      points.delete(running); // it may still get newer ones
      if (trail.length > 0) trails.set(id, trail);
    }
    return trails;
  }

  /** Ids of the axes that the person may see. */
  async ids(user: SignedInUser, siteId?: number): Promise<number[]> {
    const axes = await this.dataSource.getRepository(Axis).find({
      select: { id: true },
      where: { siteId: In(sitesOf(user).filter((id) => siteId === undefined || id === siteId)) },
    });
    return axes.map(({ id }) => id);
  }

  async summary(user: SignedInUser, siteId?: number): Promise<FleetSummaryDto> {
    const siteIds = sitesOf(user).filter((id) => siteId === undefined || id === siteId);
    const [axes, alerts, openProposals] = await Promise.all([
      this.dataSource
        .getRepository(Axis)
        .find({ select: { id: true, state: true }, where: { siteId: In(siteIds) } }),
      this.dataSource
        .getRepository(Alert)
        .find({ select: { id: true, state: true }, where: { siteId: In(siteIds), state: Not('normal') } }),
      this.dataSource.getRepository(Proposal).countBy({ siteId: In(siteIds), state: In([...LIVE_STATES]) }),
    ]);
    const count = <T extends string>(items: { state: T }[], ...states: T[]): number =>
      items.filter(({ state }) => states.includes(state)).length;
    return {
      counts: Object.fromEntries(AXIS_STATES.map((state) => [state, count(axes, state)])),
      unacknowledgedAlerts: count(alerts, 'unacknowledged', 'returned-unacknowledged'),
      acknowledgedAlerts: count(alerts, 'acknowledged'),
      openProposals,
    };
  }

  /**
   * Registers an axis and its first tuning revision.
   *
   * @throws BadRequestException naming the field; ConflictException when the tag is taken on the site
   */
  async register(body: CreateAxisDto, user: SignedInUser): Promise<Axis> {
    const machine = await this.dataSource.getRepository(Machine).findOneBy({ id: body.machineId });
    if (!machine)
      throw new BadRequestException({ errors: [{ path: 'machineId', message: 'is no machine' }] });
    requireRole(user, machine.siteId, 'axis.register', `machine ${machine.id}`);
    checkTravel(body.travel);
    const pattern = body.pattern as PolePattern;
    checkPattern(pattern);
    if (!body.gains && !body.baseline)
      throw new BadRequestException({
        errors: [{ path: 'gains', message: 'are needed where there is no baseline to place them from' }],
      });
    const gains = body.gains ?? placeGains(body.baseline!, body.structure, pattern, body.feedForward);
    const baseline: Baseline | null = body.baseline
      ? { ...body.baseline, coulomb: null, bias: null, gainForward: null, gainReverse: null }
      : null;
    const now = new Date();
    const axis = await this.transactions.run(async (manager) => {
      if (await manager.existsBy(Axis, { siteId: machine.siteId, tag: body.tag }))
        throw new ConflictException(`The site already has an axis "${body.tag}"`);
      const saved = await manager.save(Axis, {
        ...body,
        gains: undefined,
        pattern,
        baseline,
        baselineAt: baseline && now,
        siteId: machine.siteId,
        revision: 1,
        stateSince: now,
      });
      await manager.save(TuningRevision, {
        axisId: saved.id,
        revision: 1,
        structure: body.structure,
        pattern,
        feedForward: body.feedForward,
        gains,
        plant: baseline,
        source: 'commissioning',
        proposalId: null,
        appliedAt: now,
        appliedBy: user.name,
        note: null,
      });
      await this.audit.record(manager, {
        user,
        action: 'axis.registered',
        subject: { type: 'axis', id: saved.id },
        siteId: machine.siteId,
        after: { ...body },
      });
      return saved;
    });
    this.changed(axis);
    return this.get(axis.id, user);
  }

  async change(id: number, body: ChangeAxisDto, user: SignedInUser): Promise<Axis> {
    const axis = await this.get(id, user, 'axis.change');
    if (body.travel) checkTravel(body.travel);
    const before = { name: axis.name, tolerances: axis.tolerances, move: axis.move, travel: axis.travel };
    await this.transactions.run(async (manager) => {
      await manager.update(Axis, id, { ...body });
      await this.audit.record(manager, {
        user,
        action: 'axis.changed',
        subject: { type: 'axis', id },
        siteId: axis.siteId,
        before,
        after: { ...body },
      });
    });
    this.changed(axis);
    return this.get(id, user);
  }

  /** Takes an axis out of production, or hands it back. The gateway brings it to rest at the end of its move. */
  async maintain(id: number, { on, until, reason }: MaintenanceDto, user: SignedInUser): Promise<Axis> {
    const axis = await this.get(id, user, 'axis.maintenance');
    if (until && until.getTime() <= Date.now())
      throw new BadRequestException({ errors: [{ path: 'until', message: 'must lie ahead' }] });
    if (!on && (await this.dataSource.getRepository(Proposal).existsBy({ axisId: id, state: 'applying' })))
      throw new ConflictException('Gains are on their way to this axis; wait for the read-back');
    if (!on && (await this.dataSource.getRepository(Proposal).existsBy({ axisId: id, restoring: true })))
      throw new ConflictException(
        `${axis.tag} has not read its gains back yet; until it has, nobody knows what it runs with`,
      );
    await this.transactions.run(async (manager) => {
      await manager.update(Axis, id, {
        inMaintenance: on,
        maintenanceUntil: on ? (until ?? null) : null,
        maintenanceReason: on ? reason : null,
        maintenanceBy: on ? user.name : null,
      });
      await this.audit.record(manager, {
        user,
        action: on ? 'axis.maintenance-on' : 'axis.maintenance-off',
        subject: { type: 'axis', id },
        siteId: axis.siteId,
        note: reason,
        ...(until && { after: { until: until.toISOString() } }),
      });
    });
    this.gateway.sendMaintenance(id, on);
    this.changed(axis);
    return this.get(id, user);
  }

  /** Makes the present estimate the baseline: an engineer says that this is how the axis should be. */
  async confirmBaseline(id: number, user: SignedInUser): Promise<Axis> {
    const axis = await this.get(id, user, 'axis.baseline');
    const estimate = this.intake.pipeline(id)?.estimate;
    if (estimate?.verdict !== 'usable')
      throw new ConflictException(
        'There is no usable estimate of this axis yet; let it make some production moves',
      );
    return this.takeBaseline(axis, estimate, user);
  }

  /** Makes an estimate the baseline of an axis on which the person may do so; drift counts from it anew. */
  async takeBaseline(axis: Axis, estimate: PlantEstimate, user: SignedInUser, note?: string): Promise<Axis> {
    await this.transactions.run(async (manager) => {
      await manager.update(Axis, axis.id, { baseline: baselineOf(estimate), baselineAt: new Date() });
      await this.audit.record(manager, {
        user,
        action: 'axis.baseline-confirmed',
        subject: { type: 'axis', id: axis.id },
        siteId: axis.siteId,
        ...(note && { note }),
        before: axis.baseline && { ...axis.baseline },
        after: { ...baselineOf(estimate) },
      });
    });
    this.changed(axis);
    return this.get(axis.id, user);
  }

  private changed({ id, siteId }: Axis): void {
    tell(this.emitter, 'axis.changed', { axisId: id, siteId });
    tell(this.emitter, 'axis.state-changed', { axisId: id, siteId });
  }
}

/** What an estimate becomes when it is taken as the baseline. */
export const baselineOf = (estimate: PlantEstimate): Baseline => ({
  gain: estimate.gain.value,
  pole: estimate.pole.value,
  coulomb: estimate.coulomb.value,
  bias: estimate.bias.value,
  gainForward: estimate.gainForward?.value ?? null,
  gainReverse: estimate.gainReverse?.value ?? null,
});

export const estimateDto = (estimate: PlantEstimate, t: number): AxisEstimateDto => ({
  ...estimate,
  at: new Date(t * 1000),
});

function checkTravel({ min, max }: { min: number; max: number }): void {
  if (max <= min)
    throw new BadRequestException({ errors: [{ path: 'travel.max', message: 'must be above travel.min' }] });
}

/** How far an axis is off its baseline in shares of its tolerance; orders axes of one state. */
function worstDeviation({ baseline, estimate, tolerances }: AxisDto): number {
  if (!baseline || !estimate) return 0;
  return Math.max(
    (100 * Math.abs(estimate.gain.value / baseline.gain - 1)) / tolerances.gainPct,
    (100 * Math.abs(estimate.pole.value / baseline.pole - 1)) / tolerances.polePct,
  );
}
