import Database from 'better-sqlite3';
import { rmSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, expect, test } from 'vitest';
import { encodeFrame } from '../../src/telemetry/frame-codec.js';
import { randomSource } from '../identification/test-axis.js';
import { axisRows } from '../support/axis-rows.js';
import { commission, FakeGateway, type CommissionedAxis } from '../support/fake-gateway.js';
import { ProductionAxis } from '../support/production-axis.js';
import { startProcess, type ServiceProcess } from '../support/service-process.js';
import { signIn, temporaryFolder, until } from '../support/start-service.js';

/** Kills: 20 by `CRASHES=20`, which takes minutes. */
const CRASHES = Number(process.env.CRASHES ?? 3);
const SEED = Number(process.env.CRASH_SEED ?? 1);
const STEP_US = 2_000;
/** A fifth of a second a message, so that seconds are open when the service dies. */
const BLOCK_SECONDS = 0.2;
const STREAM_SECONDS = 120;
const MESSAGES = STREAM_SECONDS / BLOCK_SECONDS;
/** Time over which the messages between two kills are spread, ms: more than a beat of the checkpoint. */
const PHASE_MS = 1_400;

const folders = [temporaryFolder(), temporaryFolder()] as const;
const processes: ServiceProcess[] = [];
afterAll(async () => {
  for (const service of processes) await service.kill();
  for (const folder of folders) rmSync(folder, { recursive: true, force: true });
});

const databaseOf = (folder: string): string => join(folder, 'polewright.sqlite');

async function start(folder: string): Promise<ServiceProcess> {
  const service = await startProcess(folder);
  processes.push(service);
  return service;
}

/** Production with a load that the baseline does not know, so that there are estimates, decisions and alerts. */
function stream(): Uint8Array[] {
  const machine = new ProductionAxis(
    { gain: 12, pole: 20, coulomb: 2 },
    { kp: 8, ki: 60, kd: 0.3, kv: 1 / 12, ka: 1 / 240 },
    STEP_US,
    0.01,
  );
  machine.load = 1.6;
  const t0 = Math.floor(Date.now() / 1000) - STREAM_SECONDS - 60;
  return Array.from({ length: MESSAGES }, (_, k) =>
    encodeFrame({
      sequence: k + 1,
      blocks: [machine.run(t0 * 1e6 + Math.round(k * BLOCK_SECONDS * 1e6), BLOCK_SECONDS)],
    }),
  );
}

const pause = (ms: number): Promise<void> => new Promise((done) => setTimeout(done, ms));

/** Lets the rules look once more at all that is known, then ends the service in order. */
async function finish(service: ServiceProcess, folder: string, axis: CommissionedAxis): Promise<void> {
  await until('an alert is raised', () => axisRows(databaseOf(folder), axis.axisId).alert!.length > 0);
  await service.stop();
}

test(`killed while streaming, ${CRASHES} times: all that is written is bit for bit that of a run without a crash`, async () => {
  const [calmFolder, roughFolder] = folders;
  const messages = stream();
  let service = await start(roughFolder);
  const axis = await commission(
    { admin: await signIn(service.url, 'admin'), engineer: await signIn(service.url, 'engineer') },
    1,
    {
      sampleTime: STEP_US / 1e6,
      tolerances: { followingError: 50, gainPct: 10, polePct: 10, saturatedPct: 90 },
    },
  );
  const copy = new Database(databaseOf(roughFolder), { readonly: true });
  copy.exec(`VACUUM INTO '${databaseOf(calmFolder)}'`);
  copy.close();
  const greet = async (): Promise<{ gateway: FakeGateway; durable: number }> => {
    const gateway = await FakeGateway.connect(service.url, { token: axis.token });
    const { durableSequence } = await gateway.hello([axis.tag], 'one epoch');
    return { gateway, durable: durableSequence };
  };

  const random = randomSource(SEED);
  let sent = 0;
  let resent = 0;
  for (let crash = 0; crash < CRASHES; crash++) {
    const { gateway, durable } = await greet();
    expect(durable).toBeLessThanOrEqual(sent);
    resent += sent - durable;
    const goal = Math.floor((MESSAGES * (crash + 1)) / (CRASHES + 1));
    let alive = true;
    const dies = pause(100 + (PHASE_MS - 100) * random()).then(() => {
      alive = false;
      return service.kill();
    });
    const wait = PHASE_MS / (goal - durable);
    for (let k = durable; k < goal && alive; k++) {
      // Not waited for: messages are on their way when it dies.
      gateway.socket.emit('frames', messages[k]);
      sent = Math.max(sent, k + 1);
      await pause(wait);
    }
    await dies;
    gateway.close();
    service = await start(roughFolder);
  }
  const { gateway, durable } = await greet();
  // Without a message to send again nothing was tried.
  expect(resent + sent - durable).toBeGreaterThan(0);
  for (let k = durable; k < MESSAGES; k++)
    expect(await gateway.send(messages[k])).toEqual({ received: k + 1 });
  await finish(service, roughFolder, axis);
  gateway.close();

  service = await start(calmFolder);
  const calm = await greet();
  for (let k = 0; k < MESSAGES; k++)
    expect(await calm.gateway.send(messages[k])).toEqual({ received: k + 1 });
  await finish(service, calmFolder, axis);
  calm.gateway.close();

  const written = axisRows(databaseOf(calmFolder), axis.axisId);
  // The comparison is worth nothing unless there is something of each.
  for (const [table, rows] of Object.entries(written)) expect(rows.length, table).toBeGreaterThan(0);
  expect(written.indicator_second!.map(({ samples }) => samples)).toEqual(
    new Array(STREAM_SECONDS - 1).fill(1e6 / STEP_US),
  );
  const rough = axisRows(databaseOf(roughFolder), axis.axisId);
  for (const [table, rows] of Object.entries(written)) expect(rough[table], table).toEqual(rows);
}, 600_000);
