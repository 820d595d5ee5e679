import { Body, Controller, Get, Post, Query } from '@nestjs/common';
import { ApiBearerAuth, ApiCreatedResponse, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import type { Page } from '../page.js';
import { TelemetryGateway } from '../telemetry/telemetry.gateway.js';
import { IntakeService } from '../telemetry/intake.service.js';
import {
  CreatedGatewayDto,
  CreateGatewayDto,
  CreateMachineDto,
  CreateSiteDto,
  GatewayDto,
  GatewayPageDto,
  MachineDto,
  MachinePageDto,
  SiteDto,
  SitePageDto,
  SiteQuery,
} from './dto/site.dto.js';
import { SitesService } from './sites.service.js';

const whole = <T>(items: T[]): Page<T> => ({ items, nextCursor: null });

@ApiTags('fleet')
@ApiBearerAuth()
@Controller()
export class SitesController {
  constructor(
    private readonly service: SitesService,
    private readonly telemetry: TelemetryGateway,
    private readonly intake: IntakeService,
  ) {}

  @Get('sites')
  @ApiOkResponse({ type: SitePageDto })
  async sites(@CurrentUser() user: SignedInUser): Promise<Page<SiteDto>> {
    return whole((await this.service.sites(user)).map(({ id, name, timeZone }) => ({ id, name, timeZone })));
  }

  @Post('sites')
  @ApiCreatedResponse({ type: SiteDto })
  async createSite(@Body() body: CreateSiteDto, @CurrentUser() user: SignedInUser): Promise<SiteDto> {
    const { id, name, timeZone } = await this.service.createSite(body, user);
    return { id, name, timeZone };
  }

  @Get('machines')
  @ApiOkResponse({ type: MachinePageDto })
  async machines(
    @Query() { siteId }: SiteQuery,
    @CurrentUser() user: SignedInUser,
  ): Promise<Page<MachineDto>> {
    return whole(
      (await this.service.machines(user, siteId)).map((m) => ({ id: m.id, siteId: m.siteId, name: m.name })),
    );
  }

  @Post('machines')
  @ApiCreatedResponse({ type: MachineDto })
  async createMachine(
    @Body() body: CreateMachineDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<MachineDto> {
    const { id, siteId, name } = await this.service.createMachine(body, user);
    return { id, siteId, name };
  }

  @Get('gateways')
  @ApiOkResponse({ type: GatewayPageDto })
  async gateways(
    @Query() { siteId }: SiteQuery,
    @CurrentUser() user: SignedInUser,
  ): Promise<Page<GatewayDto>> {
    return whole(
      (await this.service.gateways(user, siteId)).map((gateway) => {
        const heardAt = this.intake.progressOf(gateway.id)?.lastSeenAt ?? null;
        return {
          id: gateway.id,
          siteId: gateway.siteId,
          name: gateway.name,
          connected: this.telemetry.connected(gateway.id),
          lastSeenAt: heardAt === null ? gateway.lastSeenAt : new Date(heardAt),
        };
      }),
    );
  }

  @Post('gateways')
  @ApiCreatedResponse({ type: CreatedGatewayDto })
  createGateway(
    @Body() body: CreateGatewayDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<CreatedGatewayDto> {
    return this.service.createGateway(body, user);
  }
}
