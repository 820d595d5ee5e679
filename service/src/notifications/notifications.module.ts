import { Module } from '@nestjs/common';
import { TypeOrmModule } from '@nestjs/typeorm';
import { AcknowledgeLinksService } from './acknowledge-links.service.js';
import { DemoInboxService } from './demo-inbox.service.js';
import { MailController } from './mail.controller.js';
import { MailOutboxService } from './mail-outbox.service.js';
import { MailSenderService } from './mail-sender.service.js';
import { Mail } from './mail.entity.js';
import { Smtp } from './smtp.js';

@Module({
  imports: [TypeOrmModule.forFeature([Mail])],
  controllers: [MailController],
  providers: [MailOutboxService, MailSenderService, Smtp, AcknowledgeLinksService, DemoInboxService],
  exports: [MailOutboxService, MailSenderService, AcknowledgeLinksService],
})
export class NotificationsModule {}
