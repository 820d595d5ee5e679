import { Column, Entity, PrimaryColumn } from 'typeorm';

/** Columns that add up from stretch to stretch. */
export const SUM_COLUMNS = [
  'samples',
  'movingSamples',
  'sumSquaredMovingError',
  'sumSquaredStandingError',
  'saturatedSamples',
  'sumSquaredOutput',
  'sumSquaredActivity',
  'activityCrossings',
  'coveredSeconds',
  'gaps',
] as const;
/** Columns of which the larger is taken. */
export const PEAK_COLUMNS = ['peakMovingError', 'peakStandingError', 'peakOutput'] as const;

/** Sums and extremes of the samples of one stretch of time; they add up from seconds to minutes to hours. */
abstract class IndicatorRollup {
  @PrimaryColumn()
  axisId: number;

  /** Start of the stretch, s since the Unix epoch, by the samples' own clock. */
  @PrimaryColumn()
  t: number;

  @Column()
  samples: number;

  @Column()
  movingSamples: number;

  /** mm, while moving */
  @Column('real')
  peakMovingError: number;

  /** mm², summed while moving */
  @Column('real')
  sumSquaredMovingError: number;

  /** mm, while standing */
  @Column('real')
  peakStandingError: number;

  /** mm², summed while standing */
  @Column('real')
  sumSquaredStandingError: number;

  /** Moving samples with the output at its limit. */
  @Column()
  saturatedSamples: number;

  /** % */
  @Column('real')
  peakOutput: number;

  /** %², summed */
  @Column('real')
  sumSquaredOutput: number;

  /** %² of the output above the loop's own band, summed */
  @Column('real')
  sumSquaredActivity: number;

  /** Sign changes of the output above the loop's own band. */
  @Column()
  activityCrossings: number;

  /** Samples times the sample time, s. */
  @Column('real')
  coveredSeconds: number;

  @Column()
  gaps: number;
}

@Entity({ withoutRowid: true })
export class IndicatorSecond extends IndicatorRollup {}

@Entity({ withoutRowid: true })
export class IndicatorMinute extends IndicatorRollup {}

@Entity({ withoutRowid: true })
export class IndicatorHour extends IndicatorRollup {}
