import { Controller, Get, Header, HttpCode, Param, Post } from '@nestjs/common';
import { ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { Throttle } from '@nestjs/throttler';
import { Public } from '../auth/public.decorator.js';
import { AcknowledgeLinkDto } from './dto/acknowledge.dto.js';
import { LinkAcknowledgementService } from './link-acknowledgement.service.js';

/** A minute and address; a person needs two or three. */
const FEW = { default: { ttl: 60_000, limit: 60 } };

/** The link in a mail: who holds it may acknowledge the one alert that it names, once. */
@ApiTags('alerts')
@Public()
@Throttle(FEW)
@Controller('acknowledge')
export class AcknowledgeController {
  constructor(private readonly links: LinkAcknowledgementService) {}

  /** What the link would acknowledge; nothing is changed. */
  @Get(':token')
  @Header('Cache-Control', 'no-store')
  @ApiOkResponse({ type: AcknowledgeLinkDto })
  view(@Param('token') token: string): Promise<AcknowledgeLinkDto> {
    return this.links.view(token, new Date());
  }

  @Post(':token')
  @HttpCode(200)
  @ApiOkResponse({ type: AcknowledgeLinkDto })
  acknowledge(@Param('token') token: string): Promise<AcknowledgeLinkDto> {
    return this.links.acknowledge(token, new Date());
  }
}
