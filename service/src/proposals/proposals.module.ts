import { Module } from '@nestjs/common';
import { AuthModule } from '../auth/auth.module.js';
import { FleetModule } from '../fleet/fleet.module.js';
import { IndicatorsModule } from '../indicators/indicators.module.js';
import { TelemetryModule } from '../telemetry/telemetry.module.js';
import { ApplyService } from './apply.service.js';
import { DraftingService } from './drafting.service.js';
import { ProposalsController } from './proposals.controller.js';
import { ReviewService } from './review.service.js';
import { NotificationsModule } from '../notifications/notifications.module.js';
import { RotaModule } from '../rota/rota.module.js';
import { ChecklistController } from './checklist.controller.js';
import { ChecklistService } from './checklist.service.js';
import { ProposalMailService } from './proposal-mail.service.js';
import { ReadBackService } from './read-back.service.js';
import { StepRecorder } from './step-recorder.js';
import { TrialService } from './trial.service.js';

@Module({
  imports: [AuthModule, FleetModule, TelemetryModule, IndicatorsModule, NotificationsModule, RotaModule],
  controllers: [ProposalsController, ChecklistController],
  providers: [
    DraftingService,
    ReviewService,
    ApplyService,
    TrialService,
    ReadBackService,
    StepRecorder,
    ChecklistService,
    ProposalMailService,
  ],
})
export class ProposalsModule {}
