import { Module } from '@nestjs/common';
import { TypeOrmModule } from '@nestjs/typeorm';
import { AuthModule } from '../auth/auth.module.js';
import { NotificationsModule } from '../notifications/notifications.module.js';
import { Invitation } from './invitation.entity.js';
import { InvitationService } from './invitation.service.js';
import { InvitationsController } from './invitations.controller.js';
import { PeopleController } from './people.controller.js';
import { PeopleService } from './people.service.js';
import { User } from './user.entity.js';

@Module({
  imports: [AuthModule, NotificationsModule, TypeOrmModule.forFeature([User, Invitation])],
  controllers: [PeopleController, InvitationsController],
  providers: [PeopleService, InvitationService],
  exports: [PeopleService, InvitationService],
})
export class PeopleModule {}
