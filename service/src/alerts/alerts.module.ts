import { Module } from '@nestjs/common';
import { IndicatorsModule } from '../indicators/indicators.module.js';
import { NotificationsModule } from '../notifications/notifications.module.js';
import { RotaModule } from '../rota/rota.module.js';
import { TelemetryModule } from '../telemetry/telemetry.module.js';
import { AlertMarks } from './alert-marks.service.js';
import { AlertNoticesService } from './alert-notices.service.js';
import { AlertRulesController, AlertsController } from './alerts.controller.js';
import { AlertRulesService } from './alert-rules.service.js';
import { AlertSteps } from './alert-steps.service.js';
import { AlertWatch } from './alert-watch.service.js';
import { AlertsService } from './alerts.service.js';
import { AxisLevelsService } from './axis-levels.service.js';
import { EscalationService } from './escalation.service.js';
import { GatewaySilence } from './gateway-silence.service.js';

@Module({
  imports: [TelemetryModule, IndicatorsModule, RotaModule, NotificationsModule],
  controllers: [AlertsController, AlertRulesController],
  providers: [
    AlertsService,
    AlertMarks,
    AlertRulesService,
    AlertSteps,
    AlertWatch,
    GatewaySilence,
    AxisLevelsService,
    EscalationService,
    AlertNoticesService,
  ],
  exports: [AlertsService],
})
export class AlertsModule {}
