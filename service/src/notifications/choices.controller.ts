import { Body, Controller, Delete, Get, HttpCode, Param, ParseIntPipe, Post, Put } from '@nestjs/common';
import { ApiBearerAuth, ApiNoContentResponse, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { ChoicesService } from './choices.service.js';
import { ChoicesDto, SetChoicesDto, SubscribeDto } from './dto/choices.dto.js';

/** How the signed-in person wants to be told. */
@ApiTags('Notifications')
@ApiBearerAuth()
@Controller('notification-choices')
export class ChoicesController {
  constructor(private readonly choices: ChoicesService) {}

  @Get()
  @ApiOkResponse({ type: ChoicesDto })
  get(@CurrentUser() user: SignedInUser): Promise<ChoicesDto> {
    return this.choices.of(user);
  }

  @Put()
  @ApiOkResponse({ type: ChoicesDto })
  async set(@CurrentUser() user: SignedInUser, @Body() body: SetChoicesDto): Promise<ChoicesDto> {
    await this.choices.set(user, body);
    return this.choices.of(user);
  }

  /** This browser shows push messages from now on. */
  @Post('browsers')
  @HttpCode(200)
  @ApiOkResponse({ type: ChoicesDto })
  async subscribe(@CurrentUser() user: SignedInUser, @Body() body: SubscribeDto): Promise<ChoicesDto> {
    await this.choices.subscribe(user, body);
    return this.choices.of(user);
  }

  @Delete('browsers/:id')
  @HttpCode(204)
  @ApiNoContentResponse()
  unsubscribe(@CurrentUser() user: SignedInUser, @Param('id', ParseIntPipe) id: number): Promise<void> {
    return this.choices.unsubscribe(user, id);
  }
}
