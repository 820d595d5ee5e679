import { Module } from '@nestjs/common';
import { NotificationsModule } from '../notifications/notifications.module.js';
import { CalendarFeedsService } from './calendar-feeds.service.js';
import { CalendarController } from './calendar.controller.js';
import { HandOverNotesService } from './hand-over-notes.service.js';
import { OverridesService } from './overrides.service.js';
import { RotaFilesService } from './rota-files.service.js';
import { RotaController } from './rota.controller.js';
import { RotaService } from './rota.service.js';
import { SwapsService } from './swaps.service.js';

@Module({
  imports: [NotificationsModule],
  // The calendar's fixed paths come before the rota's `:siteId`.
  controllers: [CalendarController, RotaController],
  providers: [
    RotaService,
    OverridesService,
    SwapsService,
    HandOverNotesService,
    RotaFilesService,
    CalendarFeedsService,
  ],
  exports: [RotaService],
})
export class RotaModule {}
