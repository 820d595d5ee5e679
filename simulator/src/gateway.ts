import { encodeFrame, type FrameBlock } from '@polewright/service/frame-codec';
import { randomUUID } from 'node:crypto';
import { io, type Socket } from 'socket.io-client';
import type { Axis } from './axis.js';
import type { Gains, Structure } from './controller.js';
import { ReplayBuffer } from './replay-buffer.js';

/** What the service answers to `hello` for one axis. */
interface GreetedAxis {
  tag: string;
  index: number;
  id: number;
  resolution: number;
  gains: Gains | null;
  revision: number;
  structure: Structure;
  maintenance: boolean;
}

interface HelloAnswer {
  axes: GreetedAxis[];
  durableSequence: number;
  unknown: string[];
}

type FrameAnswer = { received: number } | { rejected: string; sequence: number | null };

export interface GatewaySettings {
  name: string;
  url: string;
  /** Asked before every connection, as it may have been renewed. */
  token: () => string;
  /** Time between messages, ms. */
  framePeriod: number;
  /** How long samples are kept for a service that is away, s. */
  keepSeconds: number;
  /** Waiting time for an answer, ms. */
  answerWithin: number;
  /** Time now, µs since the Unix epoch, never going back. */
  now: () => number;
  log: (message: string) => void;
}

export const GATEWAY_DEFAULTS = { framePeriod: 150, keepSeconds: 600, answerWithin: 5_000 };

/** µs since the Unix epoch by the wall clock at the start of this process, then by its monotonic clock. */
export const wallClock = (): number => Math.round((performance.timeOrigin + performance.now()) * 1000);

/** Time that is made up for in one go, µs; what is longer (the computer slept) is a gap. */
const LONGEST_CATCH_UP = 10_000_000;
/** Most samples of an axis in one block. */
const LONGEST_BLOCK = 5_000;
/** Pause after something went wrong, ms. */
const PAUSE = 1_000;
/** Refusals that a second try cannot change; any other is tried again. */
const FINAL_REFUSALS = new Set([
  'not-binary',
  'too-long',
  'too-short',
  'wrong-magic',
  'wrong-version',
  'bad-sequence',
  'truncated',
  'trailing-bytes',
  'no-samples',
  'bad-sample-time',
  'bad-time',
  'bad-output',
  'unknown-axis',
  'wrong-sample-time',
]);

const GAIN_NAMES = ['kp', 'ki', 'kd', 'kv', 'ka'] as const;

/** An axis on its way to the service. Its samples are taken at startUs + k·T, k = 0, 1, 2 … */
interface Served {
  axis: Axis;
  sampleTimeUs: number;
  /** Time of its first sample, µs; null until it has been greeted. */
  startUs: number | null;
  /** Samples that have passed. */
  taken: number;
  gap: boolean;
  /** From the last greeting. */
  id: number;
  index: number | null;
}

/**
 * A machine gateway: lets its axes run in real time, keeps their samples until the service says that they are
 * durable, and sends them in order, one message at a time, again after every reconnect.
 */
export class Gateway {
  readonly buffer: ReplayBuffer;
  /** Messages refused for good, by reason. */
  readonly refused = new Map<string, number>();
  epoch = randomUUID() as string;
  private readonly served: Served[];
  private socket: Socket | null = null;
  private timer: NodeJS.Timeout | undefined;
  private lastFrameUs = 0;
  private slowestPeriod = 0;
  /** Counts greetings; a sender of an older one stops. */
  private greeting = 0;
  private greeted = false;
  private sending = false;

  constructor(
    axes: readonly Axis[],
    private readonly settings: GatewaySettings,
  ) {
    this.buffer = new ReplayBuffer(settings.keepSeconds * 1e6);
    this.served = axes.map((axis) => ({
      axis,
      sampleTimeUs: Math.round(axis.make.sampleTime * 1e6),
      startUs: null,
      taken: 0,
      gap: false,
      id: 0,
      index: null,
    }));
  }

  get connected(): boolean {
    return this.greeted;
  }

  /** Begins to look for the service, and goes on doing so. */
  start(): void {
    const { url, token, framePeriod } = this.settings;
    const socket = io(`${url}/telemetry`, {
      auth: (give) => give({ token: token() }),
      transports: ['websocket'],
      reconnectionDelay: PAUSE / 2,
      reconnectionDelayMax: 2 * PAUSE,
      forceNew: true,
    });
    this.socket = socket;
    socket.on('connect', () => void this.greet());
    socket.on('disconnect', (reason) => {
      this.greeted = false;
      this.greeting++;
      this.settings.log(
        `${this.settings.name}: connection lost (${reason}); ${this.buffer.size} messages kept`,
      );
      if (reason === 'io server disconnect') setTimeout(() => this.reconnect(socket), PAUSE).unref();
    });
    let told = '';
    socket.on('connect_error', (error) => {
      if (error.message !== told)
        this.settings.log(`${this.settings.name}: no service yet (${error.message})`);
      told = error.message;
      if (!socket.active) setTimeout(() => this.reconnect(socket), 2 * PAUSE).unref();
    });
    socket.on('durable', ({ sequence }: { sequence: number }) => this.buffer.durable(sequence));
    socket.on('slow-down', ({ keepEveryMs }: { keepEveryMs: number }) => {
      this.slowestPeriod = Number.isFinite(keepEveryMs) && keepEveryMs > 0 ? keepEveryMs : 0;
    });
    socket.on('maintenance', ({ axisId, on }: { axisId: number; on: boolean }) =>
      this.byId(axisId)?.axis.setMaintenance(on),
    );
    socket.on(
      'apply-gains',
      ({ axisId, ...order }: { axisId: number; revision: number; gains: Gains; structure: Structure }) => {
        const served = this.byId(axisId);
        const numbers = [order.revision, ...GAIN_NAMES.map((name) => order.gains?.[name])];
        if (!served || !numbers.every(Number.isFinite)) return;
        served.axis.orderGains(order);
        this.settleOrders();
      },
    );
    this.timer = setInterval(() => this.tick(), Math.min(framePeriod, 50));
  }

  /** Sends nothing more and lets its axes stand still. */
  stop(): void {
    clearInterval(this.timer);
    this.greeting++;
    this.greeted = false;
    this.socket?.removeAllListeners();
    this.socket?.disconnect();
    this.socket = null;
  }

  private reconnect(socket: Socket): void {
    if (this.socket === socket && !socket.connected) socket.connect();
  }

  private byId(axisId: number): Served | undefined {
    return this.served.find(({ index, id }) => index !== null && id === axisId);
  }

  private async greet(): Promise<void> {
    const { socket } = this;
    const { name, log, answerWithin } = this.settings;
    if (!socket) return;
    const greeting = ++this.greeting;
    try {
      const axes = this.served.map(({ axis }) => axis.make.tag);
      const answer = (await socket
        .timeout(answerWithin)
        .emitWithAck('hello', { axes, epoch: this.epoch })) as HelloAnswer | { rejected: string };
      if (greeting !== this.greeting) return;
      if ('rejected' in answer) throw new Error(answer.rejected);
      if (answer.durableSequence > this.buffer.last) {
        this.epoch = randomUUID();
        this.buffer.renumber();
        return void this.greet();
      }
      this.take(answer);
      // A service that was started anew knows of no slow-down.
      this.slowestPeriod = 0;
      this.buffer.rewind(answer.durableSequence);
      this.greeted = true;
      log(`${name}: ${answer.axes.length} axes greeted, ${this.buffer.size} messages to send`);
      if (answer.unknown.length > 0) log(`${name}: the service does not know ${answer.unknown.join(', ')}`);
      this.settleOrders();
      void this.send(greeting);
    } catch (error) {
      if (greeting !== this.greeting) return;
      log(`${name}: hello failed (${(error as Error).message})`);
      socket.disconnect();
      setTimeout(() => this.reconnect(socket), PAUSE).unref();
    }
  }

  private take(answer: HelloAnswer): void {
    const byTag = new Map(answer.axes.map((axis) => [axis.tag, axis]));
    for (const served of this.served) {
      const greeted = byTag.get(served.axis.make.tag);
      served.index = greeted?.index ?? null;
      if (!greeted) continue;
      served.id = greeted.id;
      served.axis.setMaintenance(greeted.maintenance);
      if (!served.axis.started && greeted.gains)
        served.axis.start({ revision: greeted.revision, gains: greeted.gains, structure: greeted.structure });
      served.startUs ??= this.settings.now();
    }
  }

  private tick(): void {
    const now = this.settings.now();
    const period = 1000 * Math.max(this.settings.framePeriod, this.slowestPeriod);
    if (now - this.lastFrameUs < period) return;
    this.lastFrameUs = now;
    const blocks = this.served.flatMap((served, number) => this.blocksUntil(now, served, number));
    if (blocks.length > 0) this.buffer.add(blocks);
    this.settleOrders();
    if (this.greeted) void this.send(this.greeting);
  }

  /** Lets an axis run up to now; a block's axis index is its number here until it is sent. */
  private blocksUntil(now: number, served: Served, number: number): FrameBlock[] {
    const { axis, sampleTimeUs, startUs } = served;
    if (startUs === null) return [];
    let due = Math.floor((now - startUs) / sampleTimeUs) + 1 - served.taken;
    const most = Math.floor(LONGEST_CATCH_UP / sampleTimeUs);
    if (due > most) {
      axis.skip(due - most);
      served.taken += due - most;
      served.gap = true;
      due = most;
    }
    const blocks: FrameBlock[] = [];
    while (due > 0) {
      const n = Math.min(due, LONGEST_BLOCK);
      const samples = axis.run(n);
      if (axis.silent) served.gap = true;
      else {
        blocks.push({
          axisIndex: number,
          motionEnabled: axis.started && (!axis.maintenance || axis.moving),
          gapBefore: served.gap,
          sampleTimeUs,
          startUs: startUs + served.taken * sampleTimeUs,
          ...samples,
        });
        served.gap = false;
      }
      served.taken += n;
      due -= n;
    }
    return blocks;
  }

  /** Answers for gains that an axis has taken by now. */
  private settleOrders(): void {
    if (!this.greeted) return;
    for (const { axis, id } of this.served) {
      const revision = axis.settleOrder();
      if (revision === null) continue;
      this.socket
        ?.timeout(this.settings.answerWithin)
        .emitWithAck('gains-applied', { axisId: id, revision, gains: axis.readBack() })
        .catch((error: Error) =>
          this.settings.log(`${this.settings.name}: no answer to the read-back (${error.message})`),
        );
    }
  }

  /** Sends what waits, one message after the other, until nothing is left or the connection is. */
  private async send(greeting: number): Promise<void> {
    if (this.sending) return;
    this.sending = true;
    const { name, log, answerWithin } = this.settings;
    try {
      for (let frame = this.buffer.next(); frame; frame = this.buffer.next()) {
        if (greeting !== this.greeting || !this.socket) return;
        const began = performance.now();
        const blocks = frame.blocks.flatMap((block) => {
          const index = this.served[block.axisIndex]!.index;
          return index === null ? [] : [{ ...block, axisIndex: index }];
        });
        const message = encodeFrame({ sequence: frame.sequence, blocks });
        const answer = (await this.socket
          .timeout(answerWithin)
          .emitWithAck('frames', message)) as FrameAnswer;
        if (greeting !== this.greeting) return;
        const reason = 'rejected' in answer ? answer.rejected : null;
        const word = reason?.split(':')[0] ?? '';
        if (reason === null) this.buffer.settle(frame.sequence, true);
        else if (FINAL_REFUSALS.has(word)) {
          if (!this.refused.has(word)) log(`${name}: message ${frame.sequence} refused for good: ${reason}`);
          this.refused.set(word, (this.refused.get(word) ?? 0) + 1);
          this.buffer.settle(frame.sequence, false);
        } else {
          log(`${name}: message ${frame.sequence} refused, trying again: ${reason}`);
          await pause(PAUSE);
        }
        if (this.slowestPeriod > 0) await pause(this.slowestPeriod - (performance.now() - began));
      }
    } catch (error) {
      if (greeting !== this.greeting) return;
      log(`${name}: no answer to a message (${(error as Error).message}); connecting again`);
      const { socket } = this;
      socket?.disconnect();
      if (socket) setTimeout(() => this.reconnect(socket), PAUSE).unref();
    } finally {
      this.sending = false;
      if (this.greeted && greeting !== this.greeting) void this.send(this.greeting);
    }
  }
}

const pause = (ms: number): Promise<void> => new Promise((done) => setTimeout(done, Math.max(ms, 0)));
