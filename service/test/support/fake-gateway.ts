import { io, type Socket } from 'socket.io-client';
import type { Gains, Structure } from '../../src/control/pole-placement.js';
import { encodeFrame, type FrameBlock } from '../../src/telemetry/frame-codec.js';
import type { Caller } from './start-service.js';
import { until } from './until.js';

const ACK_MS = 5_000;

export interface HelloAnswer {
  axes: {
    tag: string;
    index: number;
    id: number;
    resolution: number;
    gains: Gains;
    revision: number;
    structure: Structure;
    maintenance: boolean;
  }[];
  durableSequence: number;
  unknown: string[];
}

export type FrameAnswer = { received: number } | { rejected: string; sequence: number | null };

export interface GainsOrder {
  axisId: number;
  revision: number;
  gains: Gains;
  structure: Structure;
}

/** The client's side of `/telemetry`, under the hands of a test: it does nothing by itself. */
export class FakeGateway {
  /** Last `durable` heard. */
  durable = 0;
  /** What `apply-gains` asked for, in order. */
  readonly orders: GainsOrder[] = [];
  readonly maintenance: { axisId: number; on: boolean }[] = [];
  closedBecause: string | null = null;

  private constructor(readonly socket: Socket) {
    socket.on('durable', ({ sequence }: { sequence: number }) => (this.durable = sequence));
    socket.on('apply-gains', (order: GainsOrder) => this.orders.push(order));
    socket.on('maintenance', (told: { axisId: number; on: boolean }) => this.maintenance.push(told));
    socket.on('disconnect', (reason) => (this.closedBecause = reason));
  }

  /** @throws the service's refusal */
  static connect(url: string, auth: Record<string, unknown>): Promise<FakeGateway> {
    const socket = io(`${url}/telemetry`, {
      auth,
      transports: ['websocket'],
      reconnection: false,
      forceNew: true,
    });
    const gateway = new FakeGateway(socket);
    return new Promise((resolve, reject) => {
      socket.once('connect', () => resolve(gateway));
      socket.once('connect_error', (error) => {
        socket.close();
        reject(error);
      });
    });
  }

  ask(event: string, body: unknown): Promise<unknown> {
    return this.socket.timeout(ACK_MS).emitWithAck(event, body) as Promise<unknown>;
  }

  hello(axes: string[], epoch: string): Promise<HelloAnswer> {
    return this.ask('hello', { axes, epoch }) as Promise<HelloAnswer>;
  }

  send(message: unknown): Promise<FrameAnswer> {
    return this.ask('frames', message) as Promise<FrameAnswer>;
  }

  frame(sequence: number, blocks: FrameBlock[]): Promise<FrameAnswer> {
    return this.send(encodeFrame({ sequence, blocks }));
  }

  untilDurable(sequence: number): Promise<boolean> {
    return until(`durable ${sequence}`, () => this.durable >= sequence);
  }

  close(): void {
    this.socket.close();
  }
}

let commissioned = 0;

export interface CommissionedAxis {
  axisId: number;
  tag: string;
  token: string;
  gatewayId: number;
}

/** Registers a gateway, a machine and an axis by the API, as an administrator and an engineer would. */
export async function commission(
  { admin, engineer }: { admin: Caller; engineer: Caller },
  siteId: number,
  sheet: Record<string, unknown> = {},
): Promise<CommissionedAxis> {
  const number = ++commissioned;
  const gateway = await admin
    .post('/api/v1/gateways')
    .send({ siteId, name: `gateway ${number}` })
    .expect(201);
  const machine = await engineer
    .post('/api/v1/machines')
    .send({ siteId, name: `machine ${number}` })
    .expect(201);
  const tag = `T-${number} slide`;
  const axis = await engineer
    .post('/api/v1/axes')
    .send({
      machineId: (machine.body as { id: number }).id,
      tag,
      name: `Slide ${number}`,
      actuator: 'electric',
      resolution: 0.01,
      sampleTime: 0.002,
      travel: { min: -100, max: 600 },
      structure: 'PI-D',
      pattern: { kind: 'triple', lambda: 30 },
      feedForward: true,
      baseline: { gain: 12, pole: 20 },
      tolerances: { followingError: 2, gainPct: 15, polePct: 20, saturatedPct: 5 },
      move: { distance: 250, duration: 0.9 },
      ...sheet,
    })
    .expect(201);
  const { id, token } = gateway.body as { id: number; token: string };
  return { axisId: (axis.body as { id: number }).id, tag, token, gatewayId: id };
}
