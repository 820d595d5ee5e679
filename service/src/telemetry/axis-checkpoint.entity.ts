import { Column, Entity, PrimaryColumn } from 'typeorm';

/** Everything that an axis's pipeline knows, as it was when its gateway's durable sequence was written. */
@Entity({ withoutRowid: true })
export class AxisCheckpoint {
  @PrimaryColumn()
  axisId: number;

  @Column('blob')
  state: Buffer;
}
