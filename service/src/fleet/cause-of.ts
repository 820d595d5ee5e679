import { probableCause, type Cause } from '../identification/probable-cause.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';
import type { AxisPipeline } from '../telemetry/axis-pipeline.js';
import type { Baseline } from './axis.entity.js';

/** The probable cause of a difference between an estimate and a baseline. */
export function causeBetween(baseline: Baseline, estimate: PlantEstimate): Cause {
  return probableCause({
    baseline: {
      gain: baseline.gain,
      pole: baseline.pole,
      ...(baseline.gainForward !== null && { gainForward: baseline.gainForward }),
      ...(baseline.gainReverse !== null && { gainReverse: baseline.gainReverse }),
    },
    estimate,
    ...(baseline.coulomb !== null && { coulombBaseline: baseline.coulomb }),
    ...(baseline.bias !== null && { biasBaseline: baseline.bias }),
  });
}

/** The probable cause of a decided drift; null while nothing is decided or no baseline exists. */
export function causeOf({ decisions, estimate, facts }: AxisPipeline): Cause | null {
  const decided = decisions?.gain.state === 'drifted' || decisions?.pole.state === 'drifted';
  return decided && estimate && facts.baseline ? causeBetween(facts.baseline, estimate) : null;
}
