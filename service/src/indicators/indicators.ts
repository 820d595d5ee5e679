import type { ClosedSecond } from './second-accumulator.js';

/** Figures of a stretch of time, as people read them. */
export interface Indicators {
  /** mm, while moving; null where nothing moved */
  peakFollowingError: number | null;
  /** mm, while moving */
  rmsFollowingError: number | null;
  /** mm, while standing; null where it never stood */
  peakStandingError: number | null;
  /** % of moving time with the output at its limit */
  saturatedPct: number | null;
  /** % of the time in motion */
  movingPct: number;
  /** % */
  outputRms: number;
  /** % */
  peakOutput: number;
  /** RMS of the output above the loop's own band, % */
  outputActivity: number;
  /** Hz; null where the output is quiet above the loop's band */
  dominantHz: number | null;
  gaps: number;
}

/** Activity below this RMS, %, has no frequency worth naming. */
const QUIET = 0.2;

export type IndicatorSums = Omit<ClosedSecond, 't'>;

/** Turns sums into figures: RMS = √(Σx²/n), shares of moving samples, f ≈ sign changes / (2 · time). */
export function indicatorsOf(sums: IndicatorSums): Indicators {
  const standing = sums.samples - sums.movingSamples;
  const moved = sums.movingSamples > 0;
  const perSample = sums.samples > 0 ? 1 / sums.samples : 0;
  const outputActivity = Math.sqrt(sums.sumSquaredActivity * perSample);
  return {
    peakFollowingError: moved ? sums.peakMovingError : null,
    rmsFollowingError: moved ? Math.sqrt(sums.sumSquaredMovingError / sums.movingSamples) : null,
    peakStandingError: standing > 0 ? sums.peakStandingError : null,
    saturatedPct: moved ? (100 * sums.saturatedSamples) / sums.movingSamples : null,
    movingPct: 100 * sums.movingSamples * perSample,
    outputRms: Math.sqrt(sums.sumSquaredOutput * perSample),
    peakOutput: sums.peakOutput,
    outputActivity,
    dominantHz:
      outputActivity > QUIET && sums.coveredSeconds > 0
        ? sums.activityCrossings / (2 * sums.coveredSeconds)
        : null,
    gaps: sums.gaps,
  };
}

/** Adds up stretches of time: sums add, peaks take the larger. */
export function addUp(stretches: Iterable<IndicatorSums>): IndicatorSums {
  const total: IndicatorSums = {
    samples: 0,
    movingSamples: 0,
    peakMovingError: 0,
    sumSquaredMovingError: 0,
    peakStandingError: 0,
    sumSquaredStandingError: 0,
    saturatedSamples: 0,
    peakOutput: 0,
    sumSquaredOutput: 0,
    sumSquaredActivity: 0,
    activityCrossings: 0,
    coveredSeconds: 0,
    gaps: 0,
  };
  for (const part of stretches) {
    total.samples += part.samples;
    total.movingSamples += part.movingSamples;
    total.peakMovingError = Math.max(total.peakMovingError, part.peakMovingError);
    total.sumSquaredMovingError += part.sumSquaredMovingError;
    total.peakStandingError = Math.max(total.peakStandingError, part.peakStandingError);
    total.sumSquaredStandingError += part.sumSquaredStandingError;
    total.saturatedSamples += part.saturatedSamples;
    total.peakOutput = Math.max(total.peakOutput, part.peakOutput);
    total.sumSquaredOutput += part.sumSquaredOutput;
    total.sumSquaredActivity += part.sumSquaredActivity;
    total.activityCrossings += part.activityCrossings;
    total.coveredSeconds += part.coveredSeconds;
    total.gaps += part.gaps;
  }
  return total;
}
