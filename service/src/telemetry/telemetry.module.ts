import { Module } from '@nestjs/common';
import { AxesAtHand } from './axes-at-hand.js';
import { IntakeService } from './intake.service.js';
import { SampleRecorder } from './sample-recorder.js';
import { TelemetryGateway } from './telemetry.gateway.js';

@Module({
  providers: [AxesAtHand, SampleRecorder, IntakeService, TelemetryGateway],
  exports: [AxesAtHand, SampleRecorder, IntakeService, TelemetryGateway],
})
export class TelemetryModule {}
