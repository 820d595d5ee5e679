import { Injectable, type OnApplicationShutdown } from '@nestjs/common';
import { Counter, Gauge } from 'prom-client';
import { FairQueue, type Sized } from './fair-queue.js';
import { MAX_FRAME_BYTES } from './frame-codec.js';
import type { GatewayProgress } from './gateway-progress.js';
import { IntakeService, type FrameAnswer } from './intake.service.js';
import { Pace } from './pace.js';

/** One gateway's connection, by whichever way: what hello gave it. */
export interface GatewaySession {
  readonly progress: GatewayProgress;
  /** Axis ids by the index that hello answered. */
  served: number[];
}

interface Waiting extends Sized {
  readonly session: GatewaySession;
  readonly served: readonly number[];
  readonly message: Uint8Array;
  /** When it arrived, ms of the monotonic clock. */
  readonly at: number;
  readonly answer: (answer: FrameAnswer) => void;
}

/** Four messages of the largest size. */
const LANE_BYTES = 4 * MAX_FRAME_BYTES;
const TOTAL_BYTES = 64e6;
/** About a message of a hundred axes over a tenth of a second. */
const QUANTUM = 128e3;
/** Time for messages before sockets and timers get a turn, ms. */
const TURN_MS = 10;

const queueBytes = new Gauge({
  name: 'polewright_intake_queue_bytes',
  help: 'Bytes of telemetry messages that wait to be taken',
});
const queueMessages = new Gauge({
  name: 'polewright_intake_queue_messages',
  help: 'Telemetry messages that wait to be taken',
});
const lagSeconds = new Gauge({
  name: 'polewright_intake_lag_seconds',
  help: 'Longest wait of a telemetry message within the last second',
});
const slowDowns = new Counter({
  name: 'polewright_slow_down_total',
  help: 'Times a gateway was asked to send less often',
});

/**
 * Where messages wait between the connection and the intake: a bounded lane per gateway, served in turn. When the
 * service is behind, the gateways whose messages wait are asked to slow down; when a lane is full its next message is
 * refused as `busy`, before memory grows, and the gateway sends it again.
 */
@Injectable()
export class IntakeLine implements OnApplicationShutdown {
  private readonly queue = new FairQueue<Waiting>({
    laneBytes: LANE_BYTES,
    totalBytes: TOTAL_BYTES,
    quantum: QUANTUM,
  });
  private readonly paces = new Map<number, Pace>();
  /** Longest wait since the last beat, ms, and who was refused since then. */
  private readonly waited = new Map<number, number>();
  private readonly crowded = new Set<number>();
  private turn: NodeJS.Immediate | null = null;
  private lag = 0;

  constructor(private readonly intake: IntakeService) {}

  onApplicationShutdown(): void {
    if (this.turn) clearImmediate(this.turn);
  }

  /** Takes a message in when its turn comes; `answer` is called then, or at once when there is no room. */
  offer(session: GatewaySession, message: unknown, answer: (answer: FrameAnswer) => void): void {
    const { id, watch } = session.progress;
    const bytes = message instanceof Uint8Array ? message.byteLength : 0;
    const waiting: Waiting = {
      session,
      served: session.served,
      message: message as Uint8Array,
      bytes,
      at: performance.now(),
      answer,
    };
    if (!this.queue.offer(id, waiting)) {
      this.crowded.add(id);
      const waiting = this.queue.bytesOf(id);
      return answer(
        this.intake.refuse(
          watch,
          'busy',
          `${waiting} bytes of this gateway wait already; send it again later`,
        ),
      );
    }
    this.turn ??= setImmediate(() => this.work());
  }

  /** Takes everything of one gateway in now: before its sequence starts anew. */
  finish(gatewayId: number): void {
    for (let next = this.queue.nextOf(gatewayId); next; next = this.queue.nextOf(gatewayId)) this.take(next);
  }

  /** A gateway that greets sends as it likes until it is asked anew. */
  letRun(gatewayId: number): void {
    this.paces.delete(gatewayId);
  }

  /** Bytes of a gateway that wait. */
  bytesOf(gatewayId: number): number {
    return this.queue.bytesOf(gatewayId);
  }

  /** Bytes, messages and longest wait (s) of all that waits. */
  load(): { bytes: number; messages: number; lag: number } {
    return { bytes: this.queue.bytes, messages: this.queue.size, lag: this.lag };
  }

  /** Time between messages that a gateway was asked for, ms; 0 when it may send as it likes. */
  keepEveryMs(gatewayId: number): number {
    return this.paces.get(gatewayId)?.keepEveryMs ?? 0;
  }

  /**
   * Looks at how long messages waited since the last beat.
   *
   * @returns the gateways that must be told how far apart to send, ms
   */
  beat(gatewayIds: Iterable<number>): [gatewayId: number, keepEveryMs: number][] {
    const now = performance.now();
    const told: [number, number][] = [];
    this.lag = 0;
    for (const id of gatewayIds) {
      const first = this.queue.firstOf(id);
      const waited = Math.max(this.waited.get(id) ?? 0, first ? now - first.at : 0);
      this.lag = Math.max(this.lag, waited / 1000);
      const pace = this.paces.get(id) ?? new Pace();
      this.paces.set(id, pace);
      if (!pace.beat(waited, this.crowded.has(id))) continue;
      told.push([id, pace.keepEveryMs]);
      if (pace.keepEveryMs > 0) slowDowns.inc();
    }
    this.waited.clear();
    this.crowded.clear();
    queueBytes.set(this.queue.bytes);
    queueMessages.set(this.queue.size);
    lagSeconds.set(this.lag);
    return told;
  }

  private work(): void {
    const until = performance.now() + TURN_MS;
    let next = this.queue.next();
    while (next) {
      this.take(next);
      next = performance.now() < until ? this.queue.next() : null;
    }
    this.turn = this.queue.size > 0 ? setImmediate(() => this.work()) : null;
  }

  private take({ session, served, message, at, answer }: Waiting): void {
    const { id } = session.progress;
    const waited = performance.now() - at;
    if (waited > (this.waited.get(id) ?? 0)) this.waited.set(id, waited);
    answer(this.intake.take(session.progress, served, message));
  }
}
