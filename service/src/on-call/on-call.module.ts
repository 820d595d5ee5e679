import { Module } from '@nestjs/common';
import { AlertsModule } from '../alerts/alerts.module.js';
import { AuthModule } from '../auth/auth.module.js';
import { NotificationsModule } from '../notifications/notifications.module.js';
import { RotaModule } from '../rota/rota.module.js';
import { AcknowledgeController } from './acknowledge.controller.js';
import { DigestService } from './digest.service.js';
import { HandOverController } from './hand-over.controller.js';
import { HandOverService } from './hand-over.service.js';
import { LinkAcknowledgementService } from './link-acknowledgement.service.js';
import { RatesService } from './rates.service.js';

/** What the person on call works with: the link in the mail, the hand-over sheet, the rates. */
@Module({
  imports: [AlertsModule, AuthModule, NotificationsModule, RotaModule],
  controllers: [AcknowledgeController, HandOverController],
  providers: [LinkAcknowledgementService, HandOverService, RatesService, DigestService],
})
export class OnCallModule {}
