import { Column, Entity, PrimaryColumn } from 'typeorm';

/** Which gateway last said hello for an axis: whose silence is the axis's. */
@Entity({ withoutRowid: true })
export class ServedAxis {
  @PrimaryColumn()
  axisId: number;

  @Column()
  gatewayId: number;
}
