import { OnEvent } from '@nestjs/event-emitter';
import { Interval } from '@nestjs/schedule';
import {
  ConnectedSocket,
  MessageBody,
  SubscribeMessage,
  WebSocketGateway,
  WebSocketServer,
  type OnGatewayInit,
} from '@nestjs/websockets';
import type { Namespace, Socket } from 'socket.io';
import { AuthService } from '../auth/auth.service.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import type { Events } from '../events.js';
import { stripPoint } from '../fleet/strip-point.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { TileSource } from './tile-source.js';
import { TraceBuffer, type TraceMessage } from './trace-buffer.js';

interface Watch {
  /** Whether the page shows tiles. */
  fleet: boolean;
  /** Only these axes; null for every axis of the person's sites. */
  axes: Set<number> | null;
  /** The axis whose raw samples the page draws. */
  trace: number | null;
  /** Newest second that the page has of each axis. */
  sent: Map<number, number>;
}

interface LiveSocket extends Socket {
  data: { user: SignedInUser; watch: Watch; busy: boolean; trace: TraceBuffer | null };
}

const EVERY_MS = 500;
/**
 * A page that does not answer within this time, ms, is cut off: it connects again and begins with the newest state,
 * and until then nothing is kept for it.
 */
const ANSWER_WITHIN_MS = 10_000;

/**
 * What pages see live, `/live`. Values are conflated per page: at most two messages a second, the next one only after
 * the page has answered the former, so a slow browser skips and never queues; a stalled one is cut off.
 */
@WebSocketGateway({ namespace: '/live', cors: false, transports: ['websocket'], perMessageDeflate: false })
export class LiveGateway implements OnGatewayInit<Namespace> {
  @WebSocketServer()
  private readonly namespace: Namespace;

  get answerWithinMs(): number {
    return ANSWER_WITHIN_MS;
  }

  constructor(
    private readonly auth: AuthService,
    private readonly intake: IntakeService,
    private readonly recent: RecentSeconds,
    private readonly tiles: TileSource,
  ) {}

  afterInit(namespace: Namespace): void {
    namespace.use((socket, next) => {
      const { token } = socket.handshake.auth as { token?: unknown };
      this.auth.userFromAccessToken(typeof token === 'string' ? token : '').then(
        (user) => {
          (socket as LiveSocket).data = { user, watch: nothing(), busy: false, trace: null };
          next();
        },
        () => next(new Error('sign in first')),
      );
    });
  }

  /** Says what the page shows now; it replaces what it showed before. */
  @SubscribeMessage('watch')
  watch(@ConnectedSocket() socket: LiveSocket, @MessageBody() body: unknown): { ok: boolean } {
    const { fleet, axes, trace, traceRate } = (body ?? {}) as Record<string, unknown>;
    const allowed = typeof trace === 'number' && this.maySee(socket, trace) ? trace : null;
    socket.data.watch = {
      fleet: fleet === true,
      axes: Array.isArray(axes) ? new Set(axes.filter((id) => typeof id === 'number')) : null,
      trace: allowed,
      sent: new Map(),
    };
    const pipeline = allowed === null ? undefined : this.intake.pipeline(allowed);
    socket.data.trace = pipeline
      ? new TraceBuffer(pipeline.facts, Number.isFinite(traceRate) ? (traceRate as number) : undefined)
      : null;
    this.traceWhatIsWatched();
    return { ok: true };
  }

  handleDisconnect(): void {
    this.traceWhatIsWatched();
  }

  private maySee(socket: LiveSocket, axisId: number): boolean {
    const siteId = this.intake.pipeline(axisId)?.facts.siteId;
    return siteId !== undefined && sitesOf(socket.data.user).includes(siteId);
  }

  private traceWhatIsWatched(): void {
    this.intake.trace([...this.sockets()].flatMap(({ data }) => data.watch.trace ?? []));
  }

  @OnEvent('samples.received')
  collect({ axisId, block }: Events['samples.received']): void {
    for (const { data } of this.sockets()) if (data.watch.trace === axisId) data.trace?.push(block);
  }

  @Interval(EVERY_MS)
  async send(): Promise<void> {
    const watching = [...this.sockets()].filter(
      ({ data }) => !data.busy && (data.watch.fleet || data.watch.axes || data.watch.trace !== null),
    );
    if (watching.length === 0) return;
    const all = await this.tiles.all();
    const at = new Date();
    for (const socket of watching) {
      const { user, watch, trace } = socket.data;
      const sites = sitesOf(user);
      const tiles = all
        .filter(({ id, siteId }) => sites.includes(siteId) && (watch.fleet || watch.axes?.has(id)))
        .map(({ siteId: _, ...tile }) => {
          const since = watch.sent.get(tile.id) ?? 0;
          const seconds = this.recent.of(tile.id).filter(({ t }) => t > since);
          const newest = seconds.at(-1);
          if (newest) watch.sent.set(tile.id, newest.t);
          return { ...tile, seconds: seconds.map(stripPoint) };
        });
      this.deliver(socket, { at, tiles, trace: trace?.take() ?? null });
    }
  }

  private deliver(
    socket: LiveSocket,
    message: { at: Date; tiles: unknown[]; trace: TraceMessage | null },
  ): void {
    socket.data.busy = true;
    socket
      .timeout(this.answerWithinMs)
      .emitWithAck('values', message)
      .then(
        () => (socket.data.busy = false),
        // Not disconnect(): that would tell the page not to come back.
        () => socket.conn.close(),
      );
  }

  @OnEvent('alert.changed')
  alertChanged({ alertId, axisId, siteId }: Events['alert.changed']): void {
    this.tell(siteId, { what: 'alert', id: alertId, axisId });
  }

  @OnEvent('proposal.changed')
  proposalChanged({ proposalId, axisId, siteId }: Events['proposal.changed']): void {
    this.tell(siteId, { what: 'proposal', id: proposalId, axisId });
  }

  @OnEvent('axis.state-changed')
  axisChanged({ axisId, siteId }: Events['axis.state-changed']): void {
    this.tell(siteId, { what: 'axis', id: axisId, axisId });
  }

  @OnEvent('rota.changed')
  rotaChanged({ siteId }: Events['rota.changed']): void {
    this.tell(siteId, { what: 'rota', id: siteId, axisId: null });
  }

  /** Tells the pages of a site's people that they should ask again. */
  private tell(siteId: number, message: { what: string; id: number; axisId: number | null }): void {
    for (const socket of this.sockets())
      if (sitesOf(socket.data.user).includes(siteId)) socket.emit('changed', message);
  }

  private sockets(): Iterable<LiveSocket> {
    return (this.namespace?.sockets.values() ?? []) as Iterable<LiveSocket>;
  }
}

const nothing = (): Watch => ({ fleet: false, axes: null, trace: null, sent: new Map() });
