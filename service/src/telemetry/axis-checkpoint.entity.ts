import { Column, Entity, PrimaryColumn } from 'typeorm';

/** `part` of the row that holds an axis's judgement as JSON; the parts of its typed arrays count from 0. */
export const JUDGEMENT_PART = -1;

/** A part of what an axis's pipeline knows, as it was when its gateway's durable sequence was written. */
@Entity({ withoutRowid: true })
export class AxisCheckpoint {
  @PrimaryColumn()
  axisId: number;

  @PrimaryColumn()
  part: number;

  @Column('blob')
  state: Buffer;
}
