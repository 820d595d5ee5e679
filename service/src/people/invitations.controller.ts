import { Body, Controller, Get, HttpCode, Ip, Param, Post, Res } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { ApiNoContentResponse, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { Throttle } from '@nestjs/throttler';
import type { Response } from 'express';
import { SessionDto } from '../auth/dto/auth.dto.js';
import { Public } from '../auth/public.decorator.js';
import { setRefreshCookie } from '../auth/refresh-cookie.js';
import type { Settings } from '../settings.js';
import { AcceptInvitationDto, InvitationViewDto, RequestResetDto } from './dto/people.dto.js';
import { InvitationService } from './invitation.service.js';

/** A minute and address; a person needs one or two. */
const FEW = { default: { ttl: 60_000, limit: 20 } };

/** The ways in for people who are not signed in: links by mail. */
@ApiTags('Auth')
@Public()
@Throttle(FEW)
@Controller()
export class InvitationsController {
  constructor(
    private readonly invitations: InvitationService,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  /** Mails a link to choose a new password; answers the same whether the address is known or not. */
  @Post('auth/password-reset')
  @HttpCode(204)
  @ApiNoContentResponse()
  requestReset(@Body() body: RequestResetDto): Promise<void> {
    return this.invitations.requestReset(body.email);
  }

  @Get('invitations/:token')
  @ApiOkResponse({ type: InvitationViewDto })
  view(@Param('token') token: string): Promise<InvitationViewDto> {
    return this.invitations.view(token);
  }

  /** Makes the account, or sets the new password, and signs in. */
  @Post('invitations/:token/accept')
  @HttpCode(200)
  @ApiOkResponse({ type: SessionDto })
  async accept(
    @Param('token') token: string,
    @Body() body: AcceptInvitationDto,
    @Ip() address: string,
    @Res({ passthrough: true }) response: Response,
  ): Promise<SessionDto> {
    const { accessToken, refreshToken, user } = await this.invitations.accept(token, body, address);
    setRefreshCookie(response, refreshToken, this.config.get('PUBLIC_URL', { infer: true }));
    return { accessToken, user };
  }
}
