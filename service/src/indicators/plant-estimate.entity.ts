import { Column, Entity, PrimaryColumn } from 'typeorm';
import type { DriftDecisions } from '../telemetry/axis-pipeline.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';

/** The axis's plant as known after one more window of production moves. */
@Entity({ withoutRowid: true })
export class PlantEstimateRow {
  @PrimaryColumn()
  axisId: number;

  /** End of the window, s since the Unix epoch, by the samples' own clock. */
  @PrimaryColumn('real')
  t: number;

  @Column('simple-json')
  estimate: PlantEstimate;

  /** What the control chart said after this window. */
  @Column({ type: 'simple-json', nullable: true })
  chart: DriftDecisions | null;
}
