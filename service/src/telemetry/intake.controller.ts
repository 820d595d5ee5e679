import { Controller, ForbiddenException, Get } from '@nestjs/common';
import { ApiBearerAuth, ApiOkResponse, ApiOperation, ApiTags } from '@nestjs/swagger';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, type DataSource } from 'typeorm';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Gateway } from '../fleet/gateway.entity.js';
import { IntakeDto, type GatewayIntakeDto } from './dto/intake.dto.js';
import { GatewaySessions } from './gateway-sessions.service.js';
import { IntakeLine, type GatewaySession } from './intake-line.service.js';
import { IntakeService } from './intake.service.js';
import { serviceNow } from './service-clock.js';
import { TelemetryGateway } from './telemetry.gateway.js';

@ApiTags('telemetry')
@ApiBearerAuth()
@Controller('intake')
export class IntakeController {
  private readonly since = new Date();

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly intake: IntakeService,
    private readonly line: IntakeLine,
    private readonly sessions: GatewaySessions,
    private readonly sockets: TelemetryGateway,
  ) {}

  @Get()
  @ApiOperation({ summary: 'How the intake fares: what waits, the checkpoint, and each gateway' })
  @ApiOkResponse({ type: IntakeDto })
  async get(@CurrentUser() user: SignedInUser): Promise<IntakeDto> {
    const sites = sitesOf(user, 'intake.read');
    if (sites.length === 0) throw new ForbiddenException('The intake is for engineers and administrators');
    const gateways = await this.dataSource
      .getRepository(Gateway)
      .find({ where: { siteId: In(sites) }, order: { siteId: 'ASC', name: 'ASC' } });
    const { bytes, messages, lag } = this.line.load();
    const now = serviceNow();
    return {
      at: new Date(now),
      since: this.since,
      queueBytes: bytes,
      queueMessages: messages,
      lag,
      ...this.intake.checkpoints(),
      gateways: gateways.map((gateway) => this.gatewayDto(gateway, now)),
    };
  }

  private gatewayDto(gateway: Gateway, now: number): GatewayIntakeDto {
    const { id, siteId, name } = gateway;
    const { watch, lastSeenAt } = this.intake.progress(gateway);
    const socket = this.sockets.sessionOf(id);
    const session: GatewaySession | undefined = socket ?? this.sessions.httpSession(id);
    const rates = watch.rates(now);
    return {
      id,
      siteId,
      name,
      via: socket ? 'socket' : session ? 'http' : null,
      lastSeenAt: lastSeenAt === null ? null : new Date(lastSeenAt),
      axes: session?.served.length ?? 0,
      messagesPerSecond: rates.messages,
      samplesPerSecond: rates.samples,
      lag: watch.lag(now),
      clockOffset: watch.clockOffset(now),
      gaps: watch.gaps,
      duplicates: watch.duplicates,
      droppedSamples: watch.droppedSamples,
      refusals: [...watch.refusals]
        .map(([reason, count]) => ({ reason, count }))
        .sort((a, b) => b.count - a.count),
      queueBytes: this.line.bytesOf(id),
      keepEveryMs: this.line.keepEveryMs(id),
    };
  }
}
