import { EventEmitter2 } from '@nestjs/event-emitter';
import type { DataSource } from 'typeorm';
import type { Axis } from '../../src/fleet/axis.entity.js';
import type { Gateway } from '../../src/fleet/gateway.entity.js';
import { IntakeService } from '../../src/telemetry/intake.service.js';
import { SampleRecorder } from '../../src/telemetry/sample-recorder.js';

/** An intake without a database: it takes frames and never writes. */
export const bareIntake = (): IntakeService =>
  new IntakeService({} as DataSource, new EventEmitter2(), new SampleRecorder());

/** An axis at 1 kHz that nobody registered. */
export const bareAxis = (id: number): Axis =>
  ({
    id,
    siteId: 1,
    tag: `T-${id}`,
    sampleTime: 0.001,
    resolution: 0.01,
    pattern: { kind: 'triple', lambda: 30 },
    baseline: null,
    tolerances: { followingError: 2, gainPct: 15, polePct: 20, saturatedPct: 5 },
    revision: 1,
    inMaintenance: false,
  }) as Axis;

export const bareGateway = (id: number): Gateway =>
  ({ id, siteId: 1, epoch: null, durableSequence: 0, lastSeenAt: null }) as Gateway;
