import { Injectable } from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { Gauge } from 'prom-client';
import { In, type DataSource } from 'typeorm';
import { Alert } from '../alerts/alert.entity.js';
import { tell, type Events } from '../events.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import { AxesAtHand } from '../telemetry/axes-at-hand.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { groupBy } from '../group-by.js';
import { judgeAxis } from './axis-state.js';
import { Axis, AXIS_STATES } from './axis.entity.js';
import { causeOf } from './cause-of.js';

const axesByState = new Gauge({ name: 'polewright_axes', help: 'Axes by state', labelNames: ['state'] });

/** Judges every axis's state at each beat and writes it down when it changed. */
@Injectable()
export class AxisStateService {
  private judging = false;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly intake: IntakeService,
    private readonly axes: AxesAtHand,
    private readonly recent: RecentSeconds,
    private readonly emitter: EventEmitter2,
  ) {}

  @OnEvent('checkpoint.written')
  async judgeAll({ at }: Events['checkpoint.written']): Promise<void> {
    if (this.judging) return;
    this.judging = true;
    try {
      const axes = await this.axes.all();
      const counts = new Map<string, number>();
      const standing = groupBy(
        await this.dataSource.getRepository(Alert).find({
          select: { axisId: true, rule: true },
          where: { state: In(['unacknowledged', 'acknowledged']) },
        }),
        ({ axisId }) => axisId,
      );
      for (const axis of axes) {
        const { state, reason } = this.judge(
          axis,
          (standing.get(axis.id) ?? []).map(({ rule }) => rule),
          at,
        );
        counts.set(state, (counts.get(state) ?? 0) + 1);
        if (state === axis.state && reason === axis.stateReason) continue;
        await this.dataSource.getRepository(Axis).update(axis.id, {
          state,
          stateReason: reason,
          ...(state !== axis.state && { stateSince: at }),
        });
        if (state !== axis.state)
          tell(this.emitter, 'axis.state-changed', { axisId: axis.id, siteId: axis.siteId });
      }
      for (const state of AXIS_STATES) axesByState.set({ state }, counts.get(state) ?? 0);
    } finally {
      this.judging = false;
    }
  }

  private judge(axis: Axis, standing: string[], at: Date) {
    const pipeline = this.intake.pipeline(axis.id);
    const lastSampleAt = pipeline?.lastSampleAt ?? null;
    return judgeAxis({
      maintenance: axis.inMaintenance
        ? { until: axis.maintenanceUntil, reason: axis.maintenanceReason }
        : null,
      silence: pipeline?.heardAt == null ? null : at.getTime() / 1000 - pipeline.heardAt,
      lastSampleAt: lastSampleAt === null ? null : new Date(lastSampleAt * 1000),
      indicators: this.recent.over(axis.id),
      estimate: pipeline?.estimate ?? null,
      decisions: pipeline?.decisions ?? null,
      cause: pipeline ? causeOf(pipeline) : null,
      baseline: axis.baseline,
      tolerances: axis.tolerances,
      standing,
      timeOf: (time) => time.toLocaleTimeString('en-GB', { timeZone: axis.site.timeZone }),
    });
  }
}
