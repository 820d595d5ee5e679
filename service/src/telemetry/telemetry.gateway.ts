import { Logger } from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { Interval } from '@nestjs/schedule';
import {
  ConnectedSocket,
  MessageBody,
  SubscribeMessage,
  WebSocketGateway,
  WebSocketServer,
  type OnGatewayConnection,
  type OnGatewayDisconnect,
  type OnGatewayInit,
} from '@nestjs/websockets';
import { Gauge } from 'prom-client';
import type { Namespace, Socket } from 'socket.io';
import type { Gains, Structure } from '../control/pole-placement.js';
import { tell } from '../events.js';
import { MAX_FRAME_BYTES } from './frame-codec.js';
import { GatewaySessions, MAX_AXES, MAX_EPOCH_LENGTH, type HelloAnswer } from './gateway-sessions.service.js';
import { IntakeLine, type GatewaySession } from './intake-line.service.js';
import type { FrameAnswer } from './intake.service.js';

interface GatewaySocket extends Socket {
  data: GatewaySession;
}

const connectedGateways = new Gauge({
  name: 'polewright_gateways_connected',
  help: 'Gateways connected now',
});

const PACE_EVERY_MS = 1_000;
/** Answers that a gateway may leave unread before its connection is closed: memory is bounded on this side too. */
const MOST_UNREAD = 10_000;

/** Where machine gateways connect: `/telemetry`, one connection per token, the newest wins. */
@WebSocketGateway({
  namespace: '/telemetry',
  cors: false,
  transports: ['websocket'],
  maxHttpBufferSize: MAX_FRAME_BYTES,
  perMessageDeflate: false,
})
export class TelemetryGateway
  implements OnGatewayInit<Namespace>, OnGatewayConnection<GatewaySocket>, OnGatewayDisconnect<GatewaySocket>
{
  private readonly log = new Logger(TelemetryGateway.name);
  /** Connected sockets by gateway. */
  private readonly sockets = new Map<number, GatewaySocket>();

  @WebSocketServer()
  private readonly namespace: Namespace;

  constructor(
    private readonly sessions: GatewaySessions,
    private readonly line: IntakeLine,
    private readonly emitter: EventEmitter2,
  ) {}

  afterInit(namespace: Namespace): void {
    namespace.use((socket, next) => {
      this.admit(socket as GatewaySocket).then(() => next(), next);
    });
  }

  private async admit(socket: GatewaySocket): Promise<void> {
    const gateway = await this.sessions.gatewayOf((socket.handshake.auth as { token?: unknown }).token);
    socket.data = this.sessions.open(gateway);
    this.close(gateway.id, `Gateway ${gateway.name} connected twice; the former connection is closed`);
    this.sessions.endHttp(gateway.id);
    this.sockets.set(gateway.id, socket);
    connectedGateways.set(this.sockets.size);
  }

  /** Ends a gateway's connection, if there is one. */
  close(gatewayId: number, because: string): void {
    const socket = this.sockets.get(gatewayId);
    if (!socket) return;
    this.log.warn(because);
    this.sockets.delete(gatewayId);
    socket.disconnect(true);
  }

  /** Frames go to the line without the pipe of observables that a message handler of the framework is. */
  handleConnection(socket: GatewaySocket): void {
    let unread = 0;
    // Sent whenever the connection could hand on all that it had to write.
    socket.conn.on('drain', () => (unread = 0));
    socket.on('frames', (message: unknown, reply: unknown) => {
      this.line.offer(socket.data, message, (answer: FrameAnswer) => {
        if (typeof reply !== 'function') return;
        (reply as (answer: FrameAnswer) => void)(answer);
        if (++unread <= MOST_UNREAD || socket.disconnected) return;
        this.log.warn(`Gateway ${socket.data.progress.id} reads no answers; its connection is closed`);
        socket.disconnect(true);
      });
    });
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
    if (typeof epoch !== 'string' || epoch.length === 0 || epoch.length > MAX_EPOCH_LENGTH)
      return {
        rejected: `bad-hello: epoch must be a string of 1 to ${MAX_EPOCH_LENGTH} characters`,
      };
    return this.sessions.hello(socket.data, tags as string[], epoch);
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

  /** Asks those whose messages wait to send less often, and lets them run again. */
  @Interval(PACE_EVERY_MS)
  pace(): void {
    for (const [gatewayId, keepEveryMs] of this.line.beat(this.sockets.keys()))
      this.sockets.get(gatewayId)?.emit('slow-down', { keepEveryMs });
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

  sessionOf(gatewayId: number): GatewaySession | undefined {
    return this.sockets.get(gatewayId)?.data;
  }

  connected(gatewayId: number): boolean {
    return this.sockets.has(gatewayId);
  }

  private socketServing(axisId: number): GatewaySocket | undefined {
    for (const socket of this.sockets.values()) if (socket.data.served.includes(axisId)) return socket;
    return undefined;
  }
}
