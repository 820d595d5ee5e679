import { Body, Controller, Get, HttpCode, Ip, Post, Put, Req, Res } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import {
  ApiBearerAuth,
  ApiNoContentResponse,
  ApiOkResponse,
  ApiTags,
  ApiTooManyRequestsResponse,
  ApiUnauthorizedResponse,
} from '@nestjs/swagger';
import type { Request, Response } from 'express';
import { ProblemDto } from '../problem.filter.js';
import type { Settings } from '../settings.js';
import { AuthService, type OpenedSession } from './auth.service.js';
import { CurrentUser } from './current-user.decorator.js';
import { ChangePasswordDto, SessionDto, SignedInUserDto, SignInDto } from './dto/auth.dto.js';
import { Public } from './public.decorator.js';
import { clearRefreshCookie, refreshTokenOf, setRefreshCookie } from './refresh-cookie.js';
import type { SignedInUser } from './signed-in-user.js';

@ApiTags('Auth')
@Controller('auth')
export class AuthController {
  constructor(
    private readonly auth: AuthService,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  @Public()
  @Post('sign-in')
  @HttpCode(200)
  @ApiOkResponse({ type: SessionDto })
  @ApiUnauthorizedResponse({ type: ProblemDto })
  @ApiTooManyRequestsResponse({ type: ProblemDto, description: 'Too many failures; see Retry-After' })
  async signIn(
    @Body() body: SignInDto,
    @Ip() address: string,
    @Res({ passthrough: true }) response: Response,
  ): Promise<SessionDto> {
    return this.answer(await this.auth.signIn(body.email, body.password, address), response);
  }

  /** Takes the refresh cookie, gives the next one and a new access token. */
  @Public()
  @Post('refresh')
  @HttpCode(200)
  @ApiOkResponse({ type: SessionDto })
  @ApiUnauthorizedResponse({ type: ProblemDto })
  async refresh(
    @Req() request: Request,
    @Res({ passthrough: true }) response: Response,
  ): Promise<SessionDto> {
    try {
      return this.answer(await this.auth.refresh(refreshTokenOf(request)), response);
    } catch (error) {
      clearRefreshCookie(response, this.publicUrl);
      throw error;
    }
  }

  @Public()
  @Post('sign-out')
  @HttpCode(204)
  @ApiNoContentResponse()
  async signOut(@Req() request: Request, @Res({ passthrough: true }) response: Response): Promise<void> {
    await this.auth.signOut(refreshTokenOf(request));
    clearRefreshCookie(response, this.publicUrl);
  }

  @Get('me')
  @ApiBearerAuth()
  @ApiOkResponse({ type: SignedInUserDto })
  me(@CurrentUser() user: SignedInUser): SignedInUserDto {
    return user;
  }

  @Put('password')
  @HttpCode(204)
  @ApiBearerAuth()
  @ApiNoContentResponse({ description: 'Changed; every other session of the person has ended' })
  async changePassword(
    @Body() body: ChangePasswordDto,
    @CurrentUser() user: SignedInUser,
    @Req() request: Request,
  ): Promise<void> {
    await this.auth.changePassword(user, body.current, body.next, refreshTokenOf(request));
  }

  private answer({ accessToken, refreshToken, user }: OpenedSession, response: Response): SessionDto {
    setRefreshCookie(response, refreshToken, this.publicUrl);
    return { accessToken, user };
  }

  private get publicUrl(): string {
    return this.config.get('PUBLIC_URL', { infer: true });
  }
}
