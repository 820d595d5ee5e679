import Database from 'better-sqlite3';
import { rmSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, expect, test } from 'vitest';
import { encodeFrame, type FrameBlock } from '../../src/telemetry/frame-codec.js';
import { randomSource } from '../identification/test-axis.js';
import { commission, FakeGateway } from '../support/fake-gateway.js';
import { startProcess, type ServiceProcess } from '../support/service-process.js';
import { signIn, temporaryFolder, until } from '../support/start-service.js';

const CRASHES = 3;
const STEP_US = 2_000;
/** Samples of one message: a fifth of a second, so that seconds are open when the service dies. */
const BLOCK = 100;
const PER_SECOND = 1e6 / STEP_US;
const RESOLUTION = 0.01;

const folder = temporaryFolder();
const processes: ServiceProcess[] = [];
afterAll(async () => {
  for (const service of processes) await service.kill();
  rmSync(folder, { recursive: true, force: true });
});

async function start(): Promise<ServiceProcess> {
  const service = await startProcess(folder);
  processes.push(service);
  return service;
}

/** Message k of the stream: the same bytes whenever it is made. */
function message(sequence: number, t0: number): Uint8Array {
  const random = randomSource(sequence);
  const block: FrameBlock = {
    axisIndex: 0,
    motionEnabled: true,
    gapBefore: false,
    sampleTimeUs: STEP_US,
    startUs: t0 * 1e6 + (sequence - 1) * BLOCK * STEP_US,
    target: new Int32Array(BLOCK),
    position: new Int32Array(BLOCK),
    output: new Int16Array(BLOCK),
  };
  for (let i = 0; i < BLOCK; i++) {
    block.target[i] = 50 * ((sequence % 7) * BLOCK + i);
    block.position[i] = block.target[i]! - Math.floor(300 * random());
    block.output[i] = Math.round(12_000 * (random() - 0.5));
  }
  return encodeFrame({ sequence, blocks: [block] });
}

test('killed while streaming, three times: no sample is missing from the seconds and none is doubled', async () => {
  const t0 = Math.floor(Date.now() / 1000) - 3_600;
  let service = await start();
  const axis = await commission(
    { admin: await signIn(service.url, 'admin'), engineer: await signIn(service.url, 'engineer') },
    1,
    { sampleTime: STEP_US / 1e6, resolution: RESOLUTION },
  );

  let next = 1; // first message never sent yet
  let resent = 0;
  for (let crash = 0; crash <= CRASHES; crash++) {
    const gateway = await FakeGateway.connect(service.url, { token: axis.token });
    const { durableSequence } = await gateway.hello([axis.tag], 'one epoch');
    expect(durableSequence).toBeLessThan(next);
    resent += next - 1 - durableSequence;
    const goal = next + 60;
    // Resend what was not durable, then go on.
    for (let sequence = durableSequence + 1; sequence < goal; sequence++)
      expect(await gateway.send(message(sequence, t0))).toEqual({ received: sequence });
    next = goal;
    if (crash === CRASHES) {
      // At an orderly end everything received is written, without another beat of the checkpoint.
      await service.stop();
      gateway.close();
      break;
    }
    await until('something is durable', () => gateway.durable > durableSequence);
    // Die at another moment of the checkpoint's beat each time, with messages on their way.
    const dying = Date.now() + 300 * crash + 50;
    while (Date.now() < dying) expect(await gateway.send(message(next, t0))).toEqual({ received: next++ });
    for (let ahead = 0; ahead < 20; ahead++) gateway.socket.emit('frames', message(next++, t0));
    await service.kill();
    gateway.close();
    service = await start();
  }
  // Without a message to send again nothing was tried.
  expect(resent).toBeGreaterThan(0);

  const database = new Database(join(folder, 'polewright.sqlite'), { readonly: true });
  const rows = database
    .prepare(
      `SELECT "t", "samples", "gaps", "peakMovingError", "sumSquaredOutput" FROM "indicator_second" WHERE "axisId" = ? ORDER BY "t"`,
    )
    .all(axis.axisId) as Record<'t' | 'samples' | 'gaps' | 'peakMovingError' | 'sumSquaredOutput', number>[];
  database.close();

  const sent = (next - 1) * BLOCK;
  const closed = Math.floor((sent - 1) / PER_SECOND); // the last second closes with a later sample
  expect(rows.map(({ t }) => t)).toEqual(Array.from({ length: closed }, (_, k) => t0 + k));
  expect(rows.every(({ samples }) => samples === PER_SECOND)).toBe(true);
  expect(rows.reduce((sum, { samples }) => sum + samples, 0)).toBe(closed * PER_SECOND);
  expect(rows.every(({ gaps }) => gaps === 0)).toBe(true);
  // Also what is in them is what was sent: the squares of every output, added up here again.
  const squares = new Array<number>(closed).fill(0);
  for (let sequence = 1; sequence < next; sequence++) {
    const view = new DataView(message(sequence, t0).buffer);
    for (let i = 0; i < BLOCK; i++) {
      const second = Math.floor(((sequence - 1) * BLOCK + i) / PER_SECOND);
      if (second < closed) squares[second]! += (view.getInt16(16 + 24 + 8 * BLOCK + 2 * i, true) / 100) ** 2;
    }
  }
  for (const [k, row] of rows.entries()) expect(row.sumSquaredOutput).toBeCloseTo(squares[k]!, 5);
}, 120_000);
