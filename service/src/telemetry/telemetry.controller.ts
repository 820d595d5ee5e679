import {
  Body,
  Controller,
  Get,
  HttpCode,
  Injectable,
  Post,
  Req,
  UnauthorizedException,
  UseGuards,
  type CanActivate,
  type ExecutionContext,
} from '@nestjs/common';
import {
  ApiBearerAuth,
  ApiBody,
  ApiConsumes,
  ApiOkResponse,
  ApiOperation,
  ApiTags,
  ApiUnauthorizedResponse,
} from '@nestjs/swagger';
import { SkipThrottle } from '@nestjs/throttler';
import type { Request } from 'express';
import { Public } from '../auth/public.decorator.js';
import type { Gateway } from '../fleet/gateway.entity.js';
import { DurableDto, FrameAnswerDto, HelloAnswerDto, HelloDto } from './dto/telemetry.dto.js';
import { GatewaySessions, type HelloAnswer } from './gateway-sessions.service.js';
import { IntakeLine } from './intake-line.service.js';
import type { FrameAnswer } from './intake.service.js';
import { TelemetryGateway } from './telemetry.gateway.js';

/** A request of the gateway whose token it carries. */
type FromGateway = Request & { gateway: Gateway };

/** Lets the requests of gateways through; it looks before the body is checked. */
@Injectable()
class GatewayTokenGuard implements CanActivate {
  constructor(private readonly sessions: GatewaySessions) {}

  async canActivate(context: ExecutionContext): Promise<boolean> {
    const request = context.switchToHttp().getRequest<FromGateway>();
    const [scheme, token] = (request.headers.authorization ?? '').split(' ');
    try {
      request.gateway = await this.sessions.gatewayOf(scheme?.toLowerCase() === 'bearer' ? token : undefined);
    } catch (error) {
      throw new UnauthorizedException((error as Error).message);
    }
    return true;
  }
}

/**
 * The fallback for gateways whose way to the service lets no web socket through: the same messages and answers by
 * HTTP, with the gateway's token as Bearer. Gains and maintenance are not told this way.
 */
@ApiTags('telemetry')
@ApiBearerAuth()
@ApiUnauthorizedResponse({ description: 'The token is that of no gateway' })
@Public()
@SkipThrottle()
@UseGuards(GatewayTokenGuard)
@Controller('telemetry')
export class TelemetryController {
  constructor(
    private readonly sessions: GatewaySessions,
    private readonly line: IntakeLine,
    private readonly sockets: TelemetryGateway,
  ) {}

  @Post('hello')
  @HttpCode(200)
  @ApiOperation({
    summary: 'A gateway says what it serves; a socket of the same token is closed',
    description:
      'Needed before frames, and again when they are refused as no-hello (the service was started anew, or the token connected elsewhere).',
  })
  @ApiOkResponse({ type: HelloAnswerDto })
  async hello(@Req() { gateway }: FromGateway, @Body() { axes, epoch }: HelloDto): Promise<HelloAnswer> {
    this.sockets.close(gateway.id, `Gateway ${gateway.name} goes on by HTTP; its socket is closed`);
    return this.sessions.hello(this.sessions.openHttp(gateway), axes, epoch);
  }

  @Post('frames')
  @HttpCode(200)
  @ApiOperation({
    summary: 'One telemetry message',
    description:
      'The bytes that the socket’s event frames carries, little-endian, at most 4 MB. The answer is the socket’s: received, or rejected with the reason. busy and sequence-jump ask for the same message again, later. Send one message at a time and keep it until GET /telemetry/durable has passed it.',
  })
  @ApiConsumes('application/octet-stream')
  @ApiBody({ schema: { type: 'string', format: 'binary' } })
  @ApiOkResponse({ type: FrameAnswerDto })
  async frames(@Req() { gateway, body }: FromGateway): Promise<FrameAnswer> {
    const session = this.sessions.httpSession(gateway.id);
    if (!session) return { rejected: 'no-hello: POST telemetry/hello first', sequence: null };
    return new Promise((answer) => this.line.offer(session, body, answer));
  }

  @Get('durable')
  @ApiOperation({ summary: 'What a gateway may forget' })
  @ApiOkResponse({ type: DurableDto })
  durable(@Req() { gateway }: FromGateway): DurableDto {
    return { sequence: this.sessions.open(gateway).progress.durable };
  }
}
