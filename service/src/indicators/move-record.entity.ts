import { Column, Entity, PrimaryColumn } from 'typeorm';

/** One production move as it went; the trial of a retune compares such moves before and after. */
@Entity({ withoutRowid: true })
export class MoveRecord {
  @PrimaryColumn()
  axisId: number;

  /** Start of the move, s since the Unix epoch, by the samples' own clock. */
  @PrimaryColumn('real')
  t: number;

  /** The tuning revision that the axis ran with. */
  @Column()
  revision: number;

  /** mm, signed */
  @Column('real')
  distance: number;

  /** s, from the first to the last change of the target */
  @Column('real')
  duration: number;

  /** mm, from the first change of the target to the end of settling */
  @Column('real')
  peakError: number;

  @Column('real')
  rmsError: number;

  /** % of the move's samples with the output at its limit */
  @Column('real')
  saturatedPct: number;
}
