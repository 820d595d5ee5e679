import { decodeFrame, type Frame } from '@polewright/service/frame-codec';
import { createServer, type Server as HttpServer } from 'node:http';
import type { AddressInfo } from 'node:net';
import { Server, type Socket } from 'socket.io';
import { afterEach, beforeEach, describe, expect, it, vi } from 'vitest';
import { Axis } from './axis.js';
import { inRegisters, type Gains } from './controller.js';
import { Gateway, GATEWAY_DEFAULTS, wallClock } from './gateway.js';
import { sheetGains, tarnwickAxis, triplePoleGains } from './commissioned.js';

const feed = tarnwickAxis('CU-03 feed');
const lift = tarnwickAxis('GL-01 carriage');
const TOKEN = 'the-token-of-this-test';

/** The service's side of the wire, as small as it can be: what it heard, and what it will answer. */
class TestService {
  heard: Frame[] = [];
  hellos: { axes: string[]; epoch: string }[] = [];
  applied: { axisId: number; revision: number; gains: Gains }[] = [];
  durable = 0;
  /** null: no answer at all. */
  answer: (frame: Frame) => object | null = ({ sequence }) => ({ received: sequence });
  gains: Gains | null = sheetGains(feed);
  maintenance = false;
  known = [feed.tag, lift.tag];
  socket: Socket | null = null;
  private io: Server | null = null;
  private http: HttpServer | null = null;
  port = 0;

  async open(): Promise<void> {
    this.http = createServer();
    await new Promise<void>((done) => this.http!.listen(this.port, '127.0.0.1', done));
    this.port = (this.http.address() as AddressInfo).port;
    this.io = new Server(this.http, { serveClient: false });
    const namespace = this.io.of('/telemetry');
    namespace.use((socket, next) =>
      next(
        (socket.handshake.auth as { token?: string }).token === TOKEN
          ? undefined
          : new Error('unknown token'),
      ),
    );
    namespace.on('connection', (socket) => {
      this.socket = socket;
      socket.on('hello', (hello: { axes: string[]; epoch: string }, ack: (answer: object) => void) => {
        if (hello.epoch !== this.hellos.at(-1)?.epoch && this.hellos.length > 0) this.durable = 0;
        this.hellos.push(hello);
        const axes = hello.axes
          .filter((tag) => this.known.includes(tag))
          .map((tag, index) => ({
            tag,
            index,
            id: this.idOf(tag),
            resolution: 0.001,
            gains: this.gains,
            revision: 1,
            structure: 'PI-D',
            maintenance: this.maintenance,
          }));
        const unknown = hello.axes.filter((tag) => !this.known.includes(tag));
        ack({ axes, durableSequence: this.durable, unknown });
      });
      socket.on('frames', (message: Buffer, ack: (answer: object) => void) => {
        const frame = decodeFrame(message);
        const answer = this.answer(frame);
        if (answer && 'received' in answer) this.heard.push(frame);
        if (answer) ack(answer);
      });
      socket.on('gains-applied', (body: TestService['applied'][number], ack: (answer: object) => void) => {
        this.applied.push(body);
        ack({ received: true });
      });
    });
  }

  idOf(tag: string): number {
    return tag === feed.tag ? 41 : 42;
  }

  async close(): Promise<void> {
    this.socket = null;
    await this.io?.close();
    this.http?.closeAllConnections();
  }

  get sequences(): number[] {
    return this.heard.map(({ sequence }) => sequence);
  }
}

let service: TestService;
let gateway: Gateway;
let axes: Axis[];
/** The gateway's clock runs this much faster than the wall, or is set by hand. */
let now: () => number;
let tokens: string[];

async function until(what: () => boolean, within = 8_000): Promise<void> {
  await vi.waitFor(() => expect(what()).toBe(true), { timeout: within, interval: 10 });
}

function makeGateway(settings: { keepSeconds?: number; answerWithin?: number } = {}): void {
  axes = [new Axis(feed, 1), new Axis(lift, 1)];
  gateway = new Gateway(axes, {
    ...GATEWAY_DEFAULTS,
    framePeriod: 20,
    ...settings,
    name: 'test-gateway',
    url: `http://127.0.0.1:${service.port}`,
    token: () => tokens[0]!,
    now: () => now(),
    log: () => undefined,
  });
}

beforeEach(async () => {
  service = new TestService();
  await service.open();
  now = wallClock;
  tokens = [TOKEN];
});

afterEach(async () => {
  gateway.stop();
  await service.close();
});

/** Times of one axis's samples over all frames heard, µs. */
function timesOf(axisIndex: number): number[] {
  return service.heard.flatMap(({ blocks }) =>
    blocks
      .filter((block) => block.axisIndex === axisIndex)
      .flatMap(({ startUs, sampleTimeUs, target }) =>
        Array.from(target, (_, k) => startUs + k * sampleTimeUs),
      ),
  );
}

describe('samples', () => {
  it('are greeted, counted from 1 and stamped at exact multiples of the sample time', async () => {
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 15);
    expect(service.hellos[0]).toEqual({ axes: [feed.tag, lift.tag], epoch: gateway.epoch });
    expect(service.sequences).toEqual(service.sequences.map((_, i) => i + 1));
    for (const [index, step] of [
      [0, 1000],
      [1, 2000],
    ] as const) {
      const times = timesOf(index);
      expect(times.length).toBeGreaterThan(100);
      for (let k = 1; k < times.length; k++) expect(times[k]! - times[k - 1]!).toBe(step);
      expect(Math.abs(times.at(-1)! / 1000 - Date.now())).toBeLessThan(2_000);
    }
    expect(service.heard.every(({ blocks }) => blocks.every((b) => b.motionEnabled && !b.gapBefore))).toBe(
      true,
    );
  });

  it('are the axis’s own, to the count', async () => {
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 10);
    const heard = service.heard.flatMap(({ blocks }) =>
      blocks.filter(({ axisIndex }) => axisIndex === 0).flatMap(({ position }) => [...position]),
    );
    const twin = new Axis(feed, 1);
    twin.start({ revision: 1, gains: sheetGains(feed), structure: 'PI-D' });
    expect(heard).toEqual([...twin.run(heard.length).position]);
  });

  it('of an axis that the service does not know are not sent', async () => {
    service.known = [lift.tag];
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 5);
    const blocks = service.heard.flatMap((frame) => frame.blocks);
    expect(new Set(blocks.map(({ axisIndex }) => axisIndex))).toEqual(new Set([0]));
    expect(blocks[0]!.sampleTimeUs).toBe(2000);
  });

  it('of a silent axis are missing, and marked as a gap when it speaks again', async () => {
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 3);
    axes[0]!.addFault({ kind: 'silence', amount: 1, rampSeconds: 0 });
    const mark = service.heard.length + 2;
    await until(() => service.heard.length >= mark + 10);
    expect(
      service.heard.slice(mark).every(({ blocks }) => blocks.every(({ axisIndex }) => axisIndex === 1)),
    ).toBe(true);
    axes[0]!.heal();
    const spoke = service.heard.length + 1;
    await until(() =>
      service.heard.slice(spoke - 1).some(({ blocks }) => blocks.some((b) => b.axisIndex === 0)),
    );
    const first = service.heard
      .slice(mark)
      .flatMap(({ blocks }) => blocks.filter((b) => b.axisIndex === 0))[0]!;
    expect(first.gapBefore).toBe(true);
    expect((first.startUs - timesOf(0)[0]!) % 1000).toBe(0);
  });

  it('skip what is too long to make up for, keep the grid and say so', async () => {
    let clock = 1_700_000_000_000_000;
    now = () => clock;
    makeGateway();
    gateway.start();
    await until(() => gateway.connected);
    clock += 100_000;
    await until(() => service.heard.length >= 1);
    clock += 3_600_000_000;
    await until(() => service.heard.length >= 2);
    const [before, after] = service.heard.map(({ blocks }) => blocks.filter((b) => b.axisIndex === 0));
    expect(after![0]!.gapBefore).toBe(true);
    expect((after![0]!.startUs - before![0]!.startUs) % 1000).toBe(0);
    expect(after!.reduce((sum, { target }) => sum + target.length, 0)).toBe(10_000);
    expect(after!.at(-1)!.startUs + 1000 * after!.at(-1)!.target.length).toBe(clock + 1000);
  });
});

describe('a connection that breaks', () => {
  it('is made again and everything behind the durable sequence sent again, in order', async () => {
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 8);
    service.socket!.emit('durable', { sequence: 4 });
    await until(() => gateway.buffer.size <= gateway.buffer.last - 4);
    service.durable = 4;
    await service.close();
    await until(() => !gateway.connected);
    const made = gateway.buffer.last;
    await until(() => gateway.buffer.last >= made + 10);
    service.heard = [];
    await service.open();
    await until(() => service.heard.length >= 20);
    expect(service.sequences).toEqual(service.sequences.map((_, i) => i + 5));
    expect(service.hellos).toHaveLength(2);
    expect(service.hellos[1]!.epoch).toBe(service.hellos[0]!.epoch);
    const times = timesOf(0);
    for (let k = 1; k < times.length; k++) expect(times[k]! - times[k - 1]!).toBe(1000);
    expect(service.heard.every(({ blocks }) => blocks.every(({ gapBefore }) => !gapBefore))).toBe(true);
  });

  it('drops the oldest when it lasts longer than the buffer, and marks the gap', async () => {
    makeGateway({ keepSeconds: 1 });
    gateway.start();
    await until(() => service.heard.length >= 3);
    await service.close();
    await until(() => gateway.buffer.dropped > 10);
    service.heard = [];
    service.durable = 3;
    await service.open();
    await until(() => service.heard.length >= 5);
    const [first, ...rest] = service.heard;
    expect(first!.sequence).toBeGreaterThan(4);
    expect(first!.blocks.every(({ gapBefore }) => gapBefore)).toBe(true);
    expect(rest.every(({ blocks }) => blocks.every(({ gapBefore }) => !gapBefore))).toBe(true);
  });

  it('is made again when a message stays without an answer', async () => {
    makeGateway({ answerWithin: 200 });
    service.answer = ({ sequence }) =>
      sequence === 3 && service.hellos.length === 1 ? null : { received: sequence };
    gateway.start();
    await until(() => service.heard.length >= 6);
    expect(service.hellos).toHaveLength(2);
    expect(service.sequences.slice(0, 6)).toEqual([1, 2, 1, 2, 3, 4]);
  });

  it('is looked for until the service is there, with the token of the day', async () => {
    await service.close();
    makeGateway();
    tokens = ['an-old-token'];
    gateway.start();
    await new Promise((done) => setTimeout(done, 300));
    await service.open();
    await new Promise((done) => setTimeout(done, 1_500));
    expect(service.hellos).toEqual([]);
    tokens = [TOKEN];
    await until(() => service.heard.length >= 2);
  });

  it('starts a new epoch when the service has more than was ever sent', async () => {
    service.durable = 900;
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 3);
    expect(service.hellos).toHaveLength(2);
    expect(service.hellos[1]!.epoch).not.toBe(service.hellos[0]!.epoch);
    expect(service.sequences.slice(0, 3)).toEqual([1, 2, 3]);
  });
});

describe('refusals and slowing down', () => {
  it('leave out a message refused for good and mark the gap', async () => {
    makeGateway();
    service.answer = ({ sequence }) =>
      sequence === 3
        ? { rejected: 'wrong-sample-time: not as registered', sequence }
        : { received: sequence };
    gateway.start();
    await until(() => service.heard.length >= 6);
    expect(service.sequences.slice(0, 4)).toEqual([1, 2, 4, 5]);
    expect(service.heard[2]!.blocks.every(({ gapBefore }) => gapBefore)).toBe(true);
    expect(Object.fromEntries(gateway.refused)).toEqual({ 'wrong-sample-time': 1 });
  });

  it('send a message again that was refused for the moment', async () => {
    makeGateway();
    let busy = 1;
    service.answer = ({ sequence }) =>
      sequence === 3 && busy-- > 0 ? { rejected: 'busy: behind by 4 s', sequence } : { received: sequence };
    gateway.start();
    await until(() => service.heard.length >= 6);
    expect(service.sequences.slice(0, 6)).toEqual([1, 2, 3, 4, 5, 6]);
  });

  it('send fewer, longer messages as asked, and lose nothing', async () => {
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 3);
    service.socket!.emit('slow-down', { keepEveryMs: 400 });
    await new Promise((done) => setTimeout(done, 500));
    const mark = service.heard.length;
    await until(() => service.heard.length >= mark + 3);
    const slow = service.heard
      .slice(mark + 1)
      .map(({ blocks }) => blocks.find((b) => b.axisIndex === 0)!.target.length);
    expect(Math.min(...slow)).toBeGreaterThanOrEqual(395);
    const times = timesOf(0);
    for (let k = 1; k < times.length; k++) expect(times[k]! - times[k - 1]!).toBe(1000);
    service.socket!.emit('slow-down', { keepEveryMs: 0 });
    const fast = service.heard.length;
    await until(() => service.heard.length >= fast + 10, 3_000);
  });
});

describe('gains and maintenance', () => {
  const gains = triplePoleGains(feed.baseline, 50, 'PI-D', true);
  const apply = (revision: number, changed: Gains = gains): void => {
    service.socket!.emit('apply-gains', { axisId: 41, revision, gains: changed, structure: 'PI-D' });
  };

  it('are applied only once the axis is held at rest, and answered with what the controller holds', async () => {
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 3);
    apply(2);
    await new Promise((done) => setTimeout(done, 400));
    expect(service.applied).toEqual([]);
    service.socket!.emit('maintenance', { axisId: 41, on: true });
    await until(() => service.applied.length > 0);
    expect(service.applied).toEqual([{ axisId: 41, revision: 2, gains: inRegisters(gains) }]);
    const [block] = service.heard.at(-1)!.blocks.filter(({ axisIndex }) => axisIndex === 0);
    expect(block!.motionEnabled).toBe(false);
    service.socket!.emit('maintenance', { axisId: 41, on: false });
    await until(() => axes[0]!.moving);
  });

  it('are answered again but not applied again for the same revision', async () => {
    service.maintenance = true;
    makeGateway();
    gateway.start();
    await until(() => axes[0]!.atRest);
    apply(2);
    await until(() => service.applied.length === 1);
    apply(2, { ...gains, kp: 1 });
    await until(() => service.applied.length === 2);
    expect(service.applied[1]).toEqual(service.applied[0]);
    expect(axes[0]!.controller.gains.kp).toBe(Math.fround(gains.kp));
  });

  it('are read back wrong by the fault', async () => {
    service.maintenance = true;
    makeGateway();
    gateway.start();
    await until(() => axes[0]!.atRest);
    axes[0]!.addFault({ kind: 'read-back', amount: 0.02, rampSeconds: 0 });
    apply(2);
    await until(() => service.applied.length === 1);
    expect(service.applied[0]!.gains.kd).toBeCloseTo(gains.kd * 1.02, 6);
    expect(service.applied[0]!.gains.kp).toBe(Math.fround(gains.kp));
  });

  it('are kept over a reconnect, while maintenance is as the service says', async () => {
    service.maintenance = true;
    makeGateway();
    gateway.start();
    await until(() => axes[0]!.atRest);
    apply(7);
    await until(() => service.applied.length === 1);
    await service.close();
    service.maintenance = false;
    await until(() => !gateway.connected);
    await service.open();
    await until(() => gateway.connected);
    expect(axes[0]!.controller.gains).toEqual(inRegisters(gains));
    expect(axes[0]!.revision).toBe(7);
    expect(axes[0]!.maintenance).toBe(false);
  });

  it('that are not numbers are not taken', async () => {
    service.maintenance = true;
    makeGateway();
    gateway.start();
    await until(() => axes[0]!.atRest);
    apply(2, { ...gains, kp: 'much' } as unknown as Gains);
    service.socket!.emit('apply-gains', { axisId: 41, revision: 3, structure: 'PI-D' });
    apply(4);
    await until(() => service.applied.length === 1);
    expect(service.applied[0]!.revision).toBe(4);
  });

  it('are waited for: without any the axis stands, with the first ones it runs', async () => {
    service.gains = null;
    makeGateway();
    gateway.start();
    await until(() => service.heard.length >= 3);
    expect(axes[0]!.started).toBe(false);
    expect(
      service.heard.every(({ blocks }) => blocks.every(({ output }) => output.every((u) => u === 0))),
    ).toBe(true);
    apply(1);
    await until(() => service.applied.length === 1);
    await until(() => axes[0]!.moving);
  });
});
