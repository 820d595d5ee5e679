import Database from 'better-sqlite3';
import { execFileSync } from 'node:child_process';
import { closeSync, openSync, rmSync, writeSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, beforeAll, beforeEach, expect, test } from 'vitest';
import { encodeFrame } from '../../src/telemetry/frame-codec.js';
import { randomSource } from '../identification/test-axis.js';
import { axisRows } from '../support/axis-rows.js';
import { commission, FakeGateway, type CommissionedAxis } from '../support/fake-gateway.js';
import { ProductionAxis } from '../support/production-axis.js';
import { startProcess } from '../support/service-process.js';
import {
  signIn,
  startService,
  temporaryFolder,
  until,
  type Caller,
  type Service,
} from '../support/start-service.js';

const STEP_US = 2_000;
const BLOCK_SECONDS = 0.2;
const STREAM_SECONDS = 40;
const MESSAGES = STREAM_SECONDS / BLOCK_SECONDS;

let service: Service;
let callers: { admin: Caller; engineer: Caller };
let file: string;
let messages: Uint8Array[];
const opened: FakeGateway[] = [];

beforeAll(async () => {
  service = await startService();
  callers = { admin: await service.as('admin'), engineer: await service.as('engineer') };
  file = service.dataSource.options.database as string;
});
afterAll(() => service?.close());
beforeEach(() => {
  opened.splice(0).forEach((old) => old.close());
  messages = stream();
});

function stream(): Uint8Array[] {
  const machine = new ProductionAxis(
    { gain: 12, pole: 20, coulomb: 2 },
    { kp: 8, ki: 60, kd: 0.3, kv: 1 / 12, ka: 1 / 240 },
    STEP_US,
    0.01,
  );
  const t0 = Math.floor(Date.now() / 1000) - STREAM_SECONDS - 20;
  return Array.from({ length: MESSAGES }, (_, k) =>
    encodeFrame({
      sequence: k + 1,
      blocks: [machine.run(t0 * 1e6 + Math.round(k * BLOCK_SECONDS * 1e6), BLOCK_SECONDS)],
    }),
  );
}

const newAxis = (): Promise<CommissionedAxis> =>
  commission(callers, service.siteIds[0], { sampleTime: STEP_US / 1e6 });

async function connect(
  axis: CommissionedAxis,
  url = service.url,
): Promise<{ gateway: FakeGateway; durable: number }> {
  const gateway = await FakeGateway.connect(url, { token: axis.token });
  opened.push(gateway);
  const { durableSequence } = await gateway.hello([axis.tag], 'one epoch');
  return { gateway, durable: durableSequence };
}

async function sendAll(gateway: FakeGateway, from = 1, to = MESSAGES): Promise<void> {
  for (let sequence = from; sequence <= to; sequence++)
    expect(await gateway.send(messages[sequence - 1])).toEqual({ received: sequence });
}

/** What an axis has that was sent the whole stream once, in order. */
async function undisturbed(): Promise<ReturnType<typeof axisRows>> {
  const axis = await newAxis();
  const { gateway } = await connect(axis);
  await sendAll(gateway);
  await until('durable', () => gateway.durable === MESSAGES);
  const rows = axisRows(file, axis.axisId);
  for (const table of ['indicator_second', 'move_record', 'plant_estimate_row', 'axis_checkpoint'])
    expect(rows[table]!.length, table).toBeGreaterThan(0);
  return rows;
}

test('network cut, messages doubled and delayed, two connections with one token: the rows are bit for bit the same', async () => {
  const expected = await undisturbed();
  const axis = await newAxis();
  const random = randomSource(3);
  let { gateway } = await connect(axis);
  let next = 1;
  const met = { cut: 0, doubled: 0, delayed: 0, second: 0 };
  while (next <= MESSAGES) {
    const fate = random();
    if (fate < 0.03) {
      // Cut with messages on their way: which of them arrived, the gateway learns from durable.
      for (let k = next; k < Math.min(next + 5, MESSAGES); k++)
        gateway.socket.emit('frames', messages[k - 1]);
      gateway.socket.io.engine.close();
      const again = await connect(axis);
      gateway = again.gateway;
      next = again.durable + 1;
      met.cut++;
    } else if (fate < 0.06) {
      // A second connection takes over; the first goes on sending for a moment.
      const second = await connect(axis);
      gateway.socket.emit('frames', messages[next - 1]);
      gateway = second.gateway;
      next = second.durable + 1;
      met.second++;
    } else if (fate < 0.2) {
      await Promise.all([gateway.send(messages[next - 1]), gateway.send(messages[next - 1])]);
      next++;
      met.doubled++;
    } else if (fate < 0.23) {
      await new Promise((done) => setTimeout(done, 50));
      met.delayed++;
    } else {
      expect(await gateway.send(messages[next - 1])).toEqual({ received: next });
      next++;
    }
  }
  for (const times of Object.values(met)) expect(times).toBeGreaterThan(0);
  await until('durable', () => gateway.durable === MESSAGES);
  const rows = axisRows(file, axis.axisId);
  for (const [table, same] of Object.entries(expected)) expect(rows[table], table).toEqual(same);
});

test('the database locked by somebody else: samples are taken meanwhile, and all is written afterwards', async () => {
  const expected = await undisturbed();
  const axis = await newAxis();
  const { gateway } = await connect(axis);
  await sendAll(gateway, 1, 50);
  await until('durable', () => gateway.durable === 50);
  const other = new Database(file);
  other.exec('BEGIN IMMEDIATE');
  try {
    await sendAll(gateway, 51, 150);
    await until('two checkpoints failed', async () => {
      const { body } = await callers.engineer.get('/api/v1/intake').expect(200);
      return (body as { failedCheckpoints: number }).failedCheckpoints >= 2;
    });
    await sendAll(gateway, 151, 180);
    expect(gateway.durable).toBe(50);
  } finally {
    other.exec('ROLLBACK');
    other.close();
  }
  await sendAll(gateway, 181);
  await until('durable', () => gateway.durable === MESSAGES);
  const rows = axisRows(file, axis.axisId);
  for (const [table, same] of Object.entries(expected)) expect(rows[table], table).toEqual(same);
});

/** A file system of its own that can be filled; null where this process may not make one. */
function smallDisk(): string | null {
  const folder = temporaryFolder();
  try {
    execFileSync('mount', ['-t', 'tmpfs', '-o', 'size=48m', 'tmpfs', folder], { stdio: 'ignore' });
    return folder;
  } catch {
    rmSync(folder, { recursive: true });
    return null;
  }
}

/** Writes until nothing more can be written. */
function fillUp(path: string): void {
  const descriptor = openSync(path, 'w');
  try {
    for (const size of [1 << 20, 1 << 12])
      try {
        for (;;) writeSync(descriptor, Buffer.alloc(size));
      } catch (error) {
        if ((error as NodeJS.ErrnoException).code !== 'ENOSPC') throw error;
      }
  } finally {
    closeSync(descriptor);
  }
}

test('the disk full: samples are taken meanwhile, and all is written once there is room', async ({
  skip,
}) => {
  const disk = smallDisk();
  if (!disk) skip('a small file system can be made by root only');
  const folder = disk!;
  const running = await startProcess(folder);
  try {
    const axis = await commission(
      { admin: await signIn(running.url, 'admin'), engineer: await signIn(running.url, 'engineer') },
      1,
      { sampleTime: STEP_US / 1e6 },
    );
    const { gateway } = await connect(axis, running.url);
    await sendAll(gateway, 1, 50);
    await until('durable', () => gateway.durable === 50);
    const filler = join(folder, 'filler');
    fillUp(filler);
    await sendAll(gateway, 51, 150);
    await until('a checkpoint failed', async () => {
      const text = await (await fetch(`${running.url}/metrics`)).text();
      return /^polewright_checkpoint_failures_total [1-9]/m.test(text);
    });
    expect(gateway.durable).toBe(50);
    rmSync(filler);
    await sendAll(gateway, 151);
    await until('durable', () => gateway.durable === MESSAGES);
    const seconds = axisRows(join(folder, 'polewright.sqlite'), axis.axisId).indicator_second!;
    expect(seconds.map(({ samples }) => samples)).toEqual(new Array(STREAM_SECONDS - 1).fill(1e6 / STEP_US));
  } finally {
    await running.stop();
    execFileSync('umount', ['-l', folder]);
    rmSync(folder, { recursive: true, force: true });
  }
});
