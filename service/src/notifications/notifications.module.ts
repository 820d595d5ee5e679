import { Module } from '@nestjs/common';
import { TypeOrmModule } from '@nestjs/typeorm';
import { AcknowledgeLinksService } from './acknowledge-links.service.js';
import { ChoicesController } from './choices.controller.js';
import { ChoicesService } from './choices.service.js';
import { DemoInboxService } from './demo-inbox.service.js';
import { MailController } from './mail.controller.js';
import { MailOutboxService } from './mail-outbox.service.js';
import { MailSenderService } from './mail-sender.service.js';
import { Mail } from './mail.entity.js';
import { PushSubscription } from './push-subscription.entity.js';
import { WebPush } from './push.js';
import { QuickNoticesService } from './quick-notices.service.js';
import { Sms } from './sms.js';
import { Smtp } from './smtp.js';

@Module({
  imports: [TypeOrmModule.forFeature([Mail, PushSubscription])],
  controllers: [MailController, ChoicesController],
  providers: [
    MailOutboxService,
    MailSenderService,
    Smtp,
    WebPush,
    Sms,
    ChoicesService,
    QuickNoticesService,
    AcknowledgeLinksService,
    DemoInboxService,
  ],
  exports: [MailOutboxService, MailSenderService, AcknowledgeLinksService, QuickNoticesService],
})
export class NotificationsModule {}
