import { Module } from '@nestjs/common';
import { IndicatorsModule } from '../indicators/indicators.module.js';
import { NotificationsModule } from '../notifications/notifications.module.js';
import { RotaModule } from '../rota/rota.module.js';
import { TelemetryModule } from '../telemetry/telemetry.module.js';
import { AlertNoticesService } from './alert-notices.service.js';
import { AlertRulesController, AlertsController } from './alerts.controller.js';
import { AlertsService } from './alerts.service.js';
import { AxisLevelsService } from './axis-levels.service.js';
import { EscalationService } from './escalation.service.js';

@Module({
  imports: [TelemetryModule, IndicatorsModule, RotaModule, NotificationsModule],
  controllers: [AlertsController, AlertRulesController],
  providers: [AlertsService, AxisLevelsService, EscalationService, AlertNoticesService],
  exports: [AlertsService],
})
export class AlertsModule {}
