import { Column, Entity, PrimaryColumn } from 'typeorm';
import type { DriftChart } from '../drift/drift-chart.js';
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

  /** The control chart's values after this window. */
  @Column('simple-json')
  chart: DriftChart | null;
}
