import { Module } from '@nestjs/common';
import { IndicatorsModule } from '../indicators/indicators.module.js';
import { StorageModule } from '../storage/storage.module.js';
import { TelemetryModule } from '../telemetry/telemetry.module.js';
import { AxesController } from './axes.controller.js';
import { AxesService } from './axes.service.js';
import { AxisStateService } from './axis-state.service.js';
import { HistoryService } from './history.service.js';
import { SitesController } from './sites.controller.js';
import { SitesService } from './sites.service.js';

@Module({
  imports: [TelemetryModule, IndicatorsModule, StorageModule],
  controllers: [SitesController, AxesController],
  providers: [SitesService, AxesService, AxisStateService, HistoryService],
  exports: [AxesService, SitesService],
})
export class FleetModule {}
