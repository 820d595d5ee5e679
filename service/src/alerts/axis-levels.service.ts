import { Injectable } from '@nestjs/common';
import type { Axis } from '../fleet/axis.entity.js';
import { causeOf } from '../fleet/cause-of.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import { IntakeService } from '../telemetry/intake.service.js';
import type { AxisLevels } from './rules.js';

/** Peak error is looked at over this stretch, s: two or three moves of a busy axis. */
const ERROR_WINDOW = 30;
/** Shares of moving time need at least this much motion, s, to mean anything. */
const LEAST_MOTION = 3;

/** Puts together what the rules look at. */
@Injectable()
export class AxisLevelsService {
  constructor(
    private readonly intake: IntakeService,
    private readonly recent: RecentSeconds,
  ) {}

  /** @param trialVerdict verdict of the axis's trial; null without one */
  of(axis: Axis, at: Date, trialVerdict: string | null): AxisLevels {
    const pipeline = this.intake.pipeline(axis.id);
    const minute = this.recent.over(axis.id);
    const lately = this.recent.over(axis.id, ERROR_WINDOW);
    const estimate = pipeline?.estimate ?? null;
    const decisions = pipeline?.decisions ?? null;
    const cause = pipeline ? causeOf(pipeline) : null;
    const off = (ratio: number | undefined): number => (ratio === undefined ? 0 : 100 * (ratio - 1));
    const heardAt = pipeline?.heardAt ?? null;
    const silence = heardAt === null ? null : Math.max(0, at.getTime() / 1000 - heardAt);
    const enough =
      minute !== null && minute.movingSeconds >= LEAST_MOTION && silence !== null && silence < ERROR_WINDOW;
    return {
      saturatedPct: enough ? minute.saturatedPct : null,
      peakFollowingError: enough ? (lately?.peakFollowingError ?? null) : null,
      gainDriftPct:
        decisions &&
        (decisions.gain.state === 'drifted' ? Math.abs(off(decisions.gain.pooledRatio?.value)) : 0),
      poleDriftPct:
        decisions &&
        (decisions.pole.state === 'drifted' ? Math.abs(off(decisions.pole.pooledRatio?.value)) : 0),
      frictionRise:
        estimate?.verdict === 'usable' && axis.baseline && axis.baseline.coulomb !== null
          ? Math.max(0, estimate.coulomb.low - axis.baseline.coulomb)
          : null,
      outputActivity: minute?.outputActivity ?? null,
      dominantHz: minute?.dominantHz ?? null,
      silence,
      // Without a trial nothing is worse: what one raised clears when it ends.
      trialWorse: trialVerdict === 'worse' ? 1 : 0,
      tolerances: axis.tolerances,
      cause: cause?.sentence ?? null,
      adviceInspect: cause?.advice === 'inspect first',
    };
  }
}
