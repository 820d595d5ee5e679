import { Logger } from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import {
  ConnectedSocket,
  MessageBody,
  SubscribeMessage,
  WebSocketGateway,
  WebSocketServer,
  type OnGatewayDisconnect,
  type OnGatewayInit,
} from '@nestjs/websockets';
import { createHash } from 'node:crypto';
import { Counter, Gauge } from 'prom-client';
import type { Namespace, Socket } from 'socket.io';
import { In, type DataSource } from 'typeorm';
import type { Gains, Structure } from '../control/pole-placement.js';
import { tell } from '../events.js';
import { Axis } from '../fleet/axis.entity.js';
import { Gateway } from '../fleet/gateway.entity.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import { MAX_FRAME_BYTES } from './frame-codec.js';
import type { GatewayProgress } from './gateway-progress.js';
import { IntakeService, type FrameAnswer } from './intake.service.js';

interface GatewaySocket extends Socket {
  data: { progress: GatewayProgress; served: number[] };
}

interface HelloAnswer {
  axes: {
    tag: string;
    index: number;
    id: number;
    resolution: number;
    gains: Gains | null;
    revision: number;
    structure: Structure;
    maintenance: boolean;
  }[];
  durableSequence: number;
  unknown: string[];
}

const refusedConnections = new Counter({
  name: 'polewright_gateway_refused_total',
  help: 'Telemetry connections refused for their token',
});
const connectedGateways = new Gauge({
  name: 'polewright_gateways_connected',
  help: 'Gateways connected now',
});

const MAX_AXES = 65_535;

/** Where machine gateways connect: `/telemetry`, one connection per token, the newest wins. */
@WebSocketGateway({
  namespace: '/telemetry',
  cors: false,
  transports: ['websocket'],
  maxHttpBufferSize: MAX_FRAME_BYTES,
  perMessageDeflate: false,
})
export class TelemetryGateway implements OnGatewayInit<Namespace>, OnGatewayDisconnect<GatewaySocket> {
  private readonly log = new Logger(TelemetryGateway.name);
  /** Connected sockets by gateway. */
  private readonly sockets = new Map<number, GatewaySocket>();

  @WebSocketServer()
  private readonly namespace: Namespace;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly intake: IntakeService,
    private readonly emitter: EventEmitter2,
  ) {}

  afterInit(namespace: Namespace): void {
    namespace.use((socket, next) => {
      this.admit(socket as GatewaySocket).then(
        () => next(),
        (error: Error) => {
          refusedConnections.inc();
          next(error);
        },
      );
    });
  }

  private async admit(socket: GatewaySocket): Promise<void> {
    const { token } = socket.handshake.auth as { token?: unknown };
    if (typeof token !== 'string' || token.length === 0)
      throw new Error('a gateway token is needed: auth: { token }');
    const gateway = await this.dataSource
      .getRepository(Gateway)
      .findOneBy({ tokenHash: createHash('sha256').update(token).digest('hex') });
    if (!gateway) throw new Error('this gateway token is not known');
    socket.data = { progress: this.intake.progress(gateway), served: [] };
    const former = this.sockets.get(gateway.id);
    if (former) {
      this.log.warn(`Gateway ${gateway.name} connected twice; the former connection is closed`);
      former.disconnect(true);
    }
    this.sockets.set(gateway.id, socket);
    connectedGateways.set(this.sockets.size);
  }

  handleDisconnect(socket: GatewaySocket): void {
    const id = socket.data.progress?.id;
    if (id !== undefined && this.sockets.get(id) === socket) this.sockets.delete(id);
    connectedGateways.set(this.sockets.size);
  }

  @SubscribeMessage('hello')
  async hello(
    @ConnectedSocket() socket: GatewaySocket,
    @MessageBody() body: unknown,
  ): Promise<HelloAnswer | { rejected: string }> {
    const { axes: tags, epoch } = (body ?? {}) as { axes?: unknown; epoch?: unknown };
    if (!Array.isArray(tags) || tags.length > MAX_AXES || tags.some((tag) => typeof tag !== 'string'))
      return { rejected: 'bad-hello: axes must be a list of at most 65535 tags' };
    if (typeof epoch !== 'string' || epoch.length === 0 || epoch.length > 200)
      return { rejected: 'bad-hello: epoch must be a string of 1 to 200 characters' };
    const { progress } = socket.data;
    const wanted = [...new Set(tags as string[])];
    const known = new Map<string, Axis>();
    for (let i = 0; i < wanted.length; i += 500)
      for (const axis of await this.dataSource
        .getRepository(Axis)
        .findBy({ siteId: progress.siteId, tag: In(wanted.slice(i, i + 500)) }))
        known.set(axis.tag, axis);
    const served: number[] = [];
    const answers: HelloAnswer['axes'] = [];
    for (const axis of wanted.flatMap((tag) => known.get(tag) ?? [])) {
      this.intake.pipelineFor(axis);
      const tuning = await this.dataSource
        .getRepository(TuningRevision)
        .findOneBy({ axisId: axis.id, revision: axis.revision });
      answers.push({
        tag: axis.tag,
        index: served.length,
        id: axis.id,
        resolution: axis.resolution,
        gains: tuning?.gains ?? null,
        revision: axis.revision,
        structure: tuning?.structure ?? axis.structure,
        maintenance: axis.inMaintenance,
      });
      served.push(axis.id);
    }
    this.intake.startEpoch(progress, epoch);
    progress.lastSeenAt = Date.now();
    socket.data.served = served;
    tell(this.emitter, 'gateway.greeted', { axisIds: served });
    return {
      axes: answers,
      durableSequence: progress.durable,
      unknown: wanted.filter((tag) => !known.has(tag)),
    };
  }

  @SubscribeMessage('frames')
  frames(@ConnectedSocket() socket: GatewaySocket, @MessageBody() message: unknown): FrameAnswer {
    return this.intake.take(socket.data.progress, socket.data.served, message as Uint8Array);
  }

  @SubscribeMessage('gains-applied')
  gainsApplied(
    @ConnectedSocket() socket: GatewaySocket,
    @MessageBody() body: unknown,
  ): { received: true } | { rejected: string } {
    const { axisId, revision, gains } = (body ?? {}) as {
      axisId?: unknown;
      revision?: unknown;
      gains?: Partial<Gains>;
    };
    if (typeof axisId !== 'number' || !socket.data.served.includes(axisId))
      return { rejected: 'unknown-axis: axisId is none of those that hello answered' };
    if (typeof revision !== 'number') return { rejected: 'bad-gains: revision must be a number' };
    const { kp, ki, kd, kv, ka } = gains ?? {};
    const read = { kp, ki, kd, kv, ka };
    for (const [name, value] of Object.entries(read))
      if (typeof value !== 'number' || !Number.isFinite(value))
        return { rejected: `bad-gains: gains.${name} must be a number` };
    tell(this.emitter, 'gains.read-back', { axisId, revision, gains: read as Gains });
    return { received: true };
  }

  /** Everything that a checkpoint wrote is durable: each gateway may forget it. */
  @OnEvent('checkpoint.written')
  sendDurable(): void {
    for (const socket of this.sockets.values()) {
      const { progress } = socket.data;
      socket.emit('durable', { sequence: progress.durable });
    }
  }

  /**
   * Sends gains to the gateway that serves an axis.
   *
   * @returns false when no connected gateway serves it; then nothing was sent
   */
  sendGains(axisId: number, revision: number, gains: Gains, structure: Structure): boolean {
    const socket = this.socketServing(axisId);
    socket?.emit('apply-gains', { axisId, revision, gains, structure });
    return socket !== undefined;
  }

  /** Tells the gateway that an axis goes into or out of maintenance; false when no connected gateway serves it. */
  sendMaintenance(axisId: number, on: boolean): boolean {
    const socket = this.socketServing(axisId);
    socket?.emit('maintenance', { axisId, on });
    return socket !== undefined;
  }

  /** Whether a connected gateway serves the axis. */
  serves(axisId: number): boolean {
    return this.socketServing(axisId) !== undefined;
  }

  connected(gatewayId: number): boolean {
    return this.sockets.has(gatewayId);
  }

  private socketServing(axisId: number): GatewaySocket | undefined {
    for (const socket of this.sockets.values()) if (socket.data.served.includes(axisId)) return socket;
    return undefined;
  }
}
