import { fork, spawn } from 'node:child_process';
import { once } from 'node:events';
import { rmSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { io } from 'socket.io-client';
import { startProcess } from '../../test/support/service-process.js';

import { makeFleet, type BenchFleet } from './fleet.js';
import type { LoadOrder, LoadResult } from './load.js';

const LOAD = fileURLToPath(new URL('./load.ts', import.meta.url));
const FLOOR = fileURLToPath(new URL('./floor.ts', import.meta.url));
/** As the demo's people sign in; their module cannot be read without the entities. */
export const DEMO_PASSWORD = 'polewright-demo';
/** Processes that share the gateways. */
const LOAD_PROCESSES = 2;
/** Axes that the watching page shows. */
const WATCHED = 60;

/** What a service did under load. */
export interface UnderLoad extends LoadResult {
  /** s of CPU per second of samples: 1 is one core. */
  cores: number;
  residentStartMiB: number;
  residentEndMiB: number;
  /** From the end of a second on the axis to its value leaving for the page, ms: 95 of 100 are faster. */
  tileP95Ms: number | null;
  longestCheckpointMs: number;
}

/** Streams a fleet in real time from processes of their own. */
export async function load(
  url: string,
  gateways: BenchFleet['gateways'],
  seconds: number,
): Promise<LoadResult> {
  const parts = Array.from({ length: LOAD_PROCESSES }, (_, p) =>
    gateways.filter((__, g) => g % LOAD_PROCESSES === p),
  ).filter((part) => part.length > 0);
  const results = await Promise.all(
    parts.map(async (part) => {
      const order: LoadOrder = { url, gateways: part, seconds };
      const child = spawn(process.execPath, ['--import', 'tsx', LOAD, JSON.stringify(order)], {
        stdio: ['ignore', 'pipe', 'inherit'],
      });
      let said = '';
      child.stdout.on('data', (text: Buffer) => (said += text.toString()));
      await once(child, 'close');
      return JSON.parse(said) as LoadResult;
    }),
  );
  return results.reduce((sum, one) => ({
    samplesSent: sum.samplesSent + one.samplesSent,
    samplesTaken: sum.samplesTaken + one.samplesTaken,
    refused: sum.refused + one.refused,
    lateMs: Math.max(sum.lateMs, one.lateMs),
  }));
}

/** The service's figures now, by name. */
export async function metrics(url: string): Promise<(name: string) => number | null> {
  const text = await (await fetch(`${url}/metrics`)).text();
  return (name) => {
    const line = text.split('\n').find((row) => row.startsWith(`${name} `));
    return line === undefined ? null : Number(line.slice(name.length + 1));
  };
}

/** Signs an engineer of the demo in. */
export async function accessToken(url: string): Promise<string> {
  const answer = await fetch(`${url}/api/v1/auth/sign-in`, {
    method: 'POST',
    headers: { 'content-type': 'application/json' },
    body: JSON.stringify({ email: 'engineer@tarnwick.example', password: DEMO_PASSWORD }),
  });
  return ((await answer.json()) as { accessToken: string }).accessToken;
}

interface Values {
  at: string;
  tiles: { id: number; seconds: [t: number, ...rest: number[]][] }[];
}

/** A page that shows `WATCHED` tiles and answers at once; it notes how old each new second was when it left. */
async function watch(url: string, axisIds: number[]): Promise<{ ages: number[]; close: () => void }> {
  const ages: number[] = [];
  const socket = io(`${url}/live`, {
    auth: { token: await accessToken(url) },
    transports: ['websocket'],
    forceNew: true,
  });
  socket.on('values', ({ at, tiles }: Values, answer: () => void) => {
    const newest = tiles.flatMap(({ seconds }) => seconds.at(-1)?.[0] ?? []);
    for (const t of newest) ages.push(new Date(at).getTime() - (t + 1) * 1000);
    answer();
  });
  await once(socket as never, 'connect');
  await socket.emitWithAck('watch', { axes: axisIds.slice(0, WATCHED) });
  return { ages, close: () => socket.close() };
}

/** Runs the built service under a fleet of `axes` × 1 kHz for so many seconds. */
export async function serviceUnderLoad(axes: number, seconds: number): Promise<UnderLoad> {
  const fleet = await makeFleet(axes);
  const service = await startProcess(fleet.folder);
  try {
    const page = await watch(service.url, fleet.axisIds);
    // The compiler and the first windows of every axis are not what a running plant pays.
    await load(service.url, fleet.gateways, Math.min(10, seconds));
    page.ages.length = 0;
    const before = await metrics(service.url);
    const result = await load(service.url, fleet.gateways, seconds);
    const after = await metrics(service.url);
    page.close();
    const ages = page.ages.sort((a, b) => a - b);
    const cpu = 'process_cpu_seconds_total';
    const resident = 'process_resident_memory_bytes';
    return {
      ...result,
      // CPU time per second of samples: also where the service needs longer than that for them.
      cores: (after(cpu)! - before(cpu)!) / seconds,
      residentStartMiB: before(resident)! / 2 ** 20,
      residentEndMiB: after(resident)! / 2 ** 20,
      tileP95Ms: ages.length > 0 ? ages[Math.floor(0.95 * ages.length)]! : null,
      longestCheckpointMs: 1000 * (after('polewright_checkpoint_longest_seconds') ?? NaN),
    };
  } finally {
    await service.stop();
    rmSync(fleet.folder, { recursive: true, force: true });
  }
}

/** The same load on the floor server: share of a core. */
export async function floorUnderLoad(axes: number, seconds: number): Promise<number> {
  const floor = fork(FLOOR, { execArgv: ['--import', 'tsx'] });
  try {
    const [{ url }] = (await once(floor, 'message')) as [{ url: string }];
    const gateways = Array.from({ length: Math.ceil(axes / 100) }, (_, g) => ({
      token: `bench-${g}`,
      tags: Array.from({ length: Math.min(100, axes - g * 100) }, (__, k) => `B-${g}-${k}`),
    }));
    const cpu = async (): Promise<number> => {
      floor.send('cost');
      return ((await once(floor, 'message')) as [{ cpuSeconds: number }])[0].cpuSeconds;
    };
    await load(url, gateways, Math.min(10, seconds));
    const before = await cpu();
    await load(url, gateways, seconds);
    return ((await cpu()) - before) / seconds;
  } finally {
    floor.kill();
  }
}
