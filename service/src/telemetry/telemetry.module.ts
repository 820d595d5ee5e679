import { Module } from '@nestjs/common';
import { IntakeService } from './intake.service.js';
import { TelemetryGateway } from './telemetry.gateway.js';

@Module({
  providers: [IntakeService, TelemetryGateway],
  exports: [IntakeService, TelemetryGateway],
})
export class TelemetryModule {}
