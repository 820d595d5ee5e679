import { Controller, Get, Param, ParseIntPipe, Query } from '@nestjs/common';
import { ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { HandOverDto, HandOverQuery } from './dto/hand-over.dto.js';
import { RatesDto, RatesQuery } from './dto/rates.dto.js';
import { HandOverService } from './hand-over.service.js';
import { RatesService } from './rates.service.js';

@ApiTags('Rota')
@ApiBearerAuth()
@Controller('on-call')
export class HandOverController {
  constructor(
    private readonly handOver: HandOverService,
    private readonly rates: RatesService,
  ) {}

  /** What the person on call of a site hands over now. */
  @Get('hand-over/:siteId')
  @ApiOkResponse({ type: HandOverDto })
  sheet(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Query() { from }: HandOverQuery,
  ): Promise<HandOverDto> {
    return this.handOver.sheet(user, siteId, from ? new Date(from) : null, new Date());
  }

  /** Alert rates of a site over the last days. */
  @Get('rates')
  @ApiOkResponse({ type: RatesDto })
  ratesOf(@CurrentUser() user: SignedInUser, @Query() { siteId, days }: RatesQuery): Promise<RatesDto> {
    return this.rates.of(user, siteId, days, new Date());
  }
}
