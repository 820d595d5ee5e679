import { Injectable } from '@nestjs/common';
import type { AxisState } from '../fleet/axis.entity.js';
import type { Interval, LnCovariance } from '../identification/plant-estimate.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import { AxesAtHand } from '../telemetry/axes-at-hand.js';
import { IntakeService } from '../telemetry/intake.service.js';

/** What changes on a tile from second to second. */
export interface LiveTile {
  id: number;
  siteId: number;
  state: AxisState;
  stateReason: string;
  indicators: {
    peakFollowingError: number | null;
    rmsFollowingError: number | null;
    saturatedPct: number | null;
    at: Date;
  } | null;
  estimate: { gain: Interval; pole: Interval; lnCovariance: LnCovariance } | null;
}

/** The tiles of the whole fleet, put together once per beat for however many pages watch. */
@Injectable()
export class TileSource {
  constructor(
    private readonly axes: AxesAtHand,
    private readonly intake: IntakeService,
    private readonly recent: RecentSeconds,
  ) {}

  async all(): Promise<LiveTile[]> {
    const axes = await this.axes.all();
    return axes.map(({ id, siteId, state, stateReason }) => {
      const indicators = this.recent.over(id);
      const estimate = this.intake.pipeline(id)?.estimate;
      return {
        id,
        siteId,
        state,
        stateReason,
        indicators: indicators && {
          peakFollowingError: indicators.peakFollowingError,
          rmsFollowingError: indicators.rmsFollowingError,
          saturatedPct: indicators.saturatedPct,
          at: indicators.at,
        },
        estimate: estimate
          ? { gain: estimate.gain, pole: estimate.pole, lnCovariance: estimate.lnCovariance }
          : null,
      };
    });
  }
}
