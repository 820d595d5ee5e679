import { Module } from '@nestjs/common';
import { AxesAtHand } from './axes-at-hand.js';
import { IntakeService } from './intake.service.js';
import { TelemetryGateway } from './telemetry.gateway.js';

@Module({
  providers: [AxesAtHand, IntakeService, TelemetryGateway],
  exports: [AxesAtHand, IntakeService, TelemetryGateway],
})
export class TelemetryModule {}
