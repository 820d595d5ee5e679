import type { EventEmitter2 } from '@nestjs/event-emitter';
import type { DriftDecisions } from './telemetry/axis-pipeline.js';
import type { PlantEstimate } from './identification/plant-estimate.js';
import type { RecordedMove } from './indicators/move-recorder.js';
import type { ClosedSecond } from './indicators/second-accumulator.js';
import type { FrameBlock } from './telemetry/frame-codec.js';
import type { Gains } from './control/pole-placement.js';

/**
 * What the modules tell each other. Every event is sent after the database holds what it tells; a listener that
 * misses one finds the same in the tables at its next look.
 */
export interface Events {
  /** Seconds that closed on one axis, durable. */
  'seconds.closed': { axisId: number; seconds: ClosedSecond[] };
  'window.closed': { axisId: number; t: number; moves: RecordedMove[] };
  'estimate.updated': { axisId: number; t: number; estimate: PlantEstimate };
  'drift.decided': { axisId: number; decisions: DriftDecisions };
  /** After each checkpoint: a steady beat for everything that looks at levels. */
  'checkpoint.written': { at: Date };
  'alert.raised': { alertId: number; axisId: number; siteId: number };
  'alert.changed': { alertId: number; axisId: number; siteId: number };
  'proposal.changed': { proposalId: number; axisId: number; siteId: number };
  /** A gateway read gains back from a controller. */
  'gains.read-back': { axisId: number; revision: number; gains: Gains };
  /** A gateway has said hello and was answered with the running gains of these axes. */
  'gateway.greeted': { gatewayId: number; axisIds: number[] };
  'tuning.applied': { axisId: number; siteId: number; revision: number };
  'axis.changed': { axisId: number; siteId: number };
  'axis.state-changed': { axisId: number; siteId: number };
  'rota.changed': { siteId: number };
  'person.changed': { userId: number };
  /** Raw samples of an axis that a page traces. */
  'samples.received': { axisId: number; block: FrameBlock };
}

/** Sends an event of the table above, with its payload checked. */
export const tell = <Name extends keyof Events>(
  emitter: EventEmitter2,
  name: Name,
  payload: Events[Name],
): boolean => emitter.emit(name, payload);
