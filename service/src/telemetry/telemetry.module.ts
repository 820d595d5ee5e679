import { Module, type MiddlewareConsumer, type NestModule } from '@nestjs/common';
import express from 'express';
import { AxesAtHand } from './axes-at-hand.js';
import { MAX_FRAME_BYTES } from './frame-codec.js';
import { GatewaySessions } from './gateway-sessions.service.js';
import { IntakeController } from './intake.controller.js';
import { IntakeLine } from './intake-line.service.js';
import { IntakeService } from './intake.service.js';
import { SampleRecorder } from './sample-recorder.js';
import { TelemetryController } from './telemetry.controller.js';
import { TelemetryGateway } from './telemetry.gateway.js';

@Module({
  controllers: [TelemetryController, IntakeController],
  providers: [AxesAtHand, SampleRecorder, IntakeService, IntakeLine, GatewaySessions, TelemetryGateway],
  exports: [AxesAtHand, SampleRecorder, IntakeService, TelemetryGateway],
})
export class TelemetryModule implements NestModule {
  configure(consumer: MiddlewareConsumer): void {
    consumer
      .apply(express.raw({ type: 'application/octet-stream', limit: MAX_FRAME_BYTES }))
      .forRoutes('telemetry/frames');
  }
}
