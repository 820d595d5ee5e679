import { Module } from '@nestjs/common';
import { AuthModule } from '../auth/auth.module.js';
import { FleetModule } from '../fleet/fleet.module.js';
import { IndicatorsModule } from '../indicators/indicators.module.js';
import { TelemetryModule } from '../telemetry/telemetry.module.js';
import { ApplyService } from './apply.service.js';
import { DraftingService } from './drafting.service.js';
import { ProposalsController } from './proposals.controller.js';
import { ReviewService } from './review.service.js';
import { TrialService } from './trial.service.js';

@Module({
  imports: [AuthModule, FleetModule, TelemetryModule, IndicatorsModule],
  controllers: [ProposalsController],
  providers: [DraftingService, ReviewService, ApplyService, TrialService],
})
export class ProposalsModule {}
