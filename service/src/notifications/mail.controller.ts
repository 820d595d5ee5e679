import {
  Controller,
  ForbiddenException,
  Get,
  HttpCode,
  Param,
  ParseIntPipe,
  Post,
  Query,
} from '@nestjs/common';
import { ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { DemoInboxService } from './demo-inbox.service.js';
import { DemoInboxDto, MailDto, MailPageDto, MailQueryDto } from './dto/mail.dto.js';
import { MailOutboxService } from './mail-outbox.service.js';
import type { Mail } from './mail.entity.js';

const asDto = (mail: Mail): MailDto => ({
  id: mail.id,
  to: mail.to,
  subject: mail.subject,
  state: mail.state,
  attempts: mail.attempts,
  createdAt: mail.createdAt.toISOString(),
  sentAt: mail.sentAt?.toISOString() ?? null,
  error: mail.error,
  alertId: mail.alertId,
  channel: mail.channel,
  perhapsAgain: mail.perhapsAgain,
  groupId: mail.groupId,
});

@ApiTags('Mail')
@ApiBearerAuth()
@Controller('mail')
export class MailController {
  constructor(
    private readonly outbox: MailOutboxService,
    private readonly inbox: DemoInboxService,
  ) {}

  @Get('outbox')
  @ApiOkResponse({ type: MailPageDto })
  async list(@CurrentUser() user: SignedInUser, @Query() query: MailQueryDto): Promise<MailPageDto> {
    requireMailManager(user);
    const { items, nextCursor } = await this.outbox.list(user, {
      state: query.state,
      limit: query.limit,
      beforeId: query.cursor,
    });
    return { items: items.map(asDto), nextCursor };
  }

  @Post('outbox/:id/resend')
  @HttpCode(200)
  @ApiOkResponse({ type: MailDto })
  async resend(@CurrentUser() user: SignedInUser, @Param('id', ParseIntPipe) id: number): Promise<MailDto> {
    requireMailManager(user);
    return asDto(await this.outbox.resend(user, id));
  }

  @Get('demo-inbox')
  @ApiOkResponse({ type: DemoInboxDto })
  messages(): Promise<DemoInboxDto> {
    return this.inbox.messages();
  }
}

function requireMailManager(user: SignedInUser): void {
  if (sitesOf(user, 'mail.manage').length === 0)
    throw new ForbiddenException('The mail outbox is for administrators');
}
