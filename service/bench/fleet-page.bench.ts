import { rmSync } from 'node:fs';
import { chromium, type CDPSession, type Page } from 'playwright-core';
import { startProcess } from '../test/support/service-process.js';
import { makeFleet } from './intake/fleet.js';
import { DEMO_PASSWORD, load } from './intake/run-load.js';
import { round, type BenchRecord } from './measure.js';

const AXES = Number(process.env.BENCH_PAGE_AXES ?? 500);
/** Minutes that the page is watched; the heap is looked at over all of them. */
const MINUTES = Number(process.env.BENCH_PAGE_MINUTES ?? 5);
/** Seconds of scrolling at the beginning of each minute. */
const SCROLLED = 15;
/** Seconds before anything is measured: the page loads, the compiler and the first windows of every axis. */
const SETTLED = 20;
/** What is asked of the page: the longest task, ms, and the share of a core. */
const LONGEST_TASK = 50;
const CORE = 0.4;

/**
 * The fleet page with hundreds of axes in headless Chromium, values arriving twice a second: long tasks while it
 * scrolls, CPU time of the page's own process, and its heap after a collection, minute by minute.
 */
export default async function bench(): Promise<BenchRecord[]> {
  const fleet = await makeFleet(AXES);
  const service = await startProcess(fleet.folder);
  const browser = await chromium.launch({
    executablePath: process.env.CHROMIUM ?? '/usr/bin/chromium',
    headless: true,
    args: [
      '--no-sandbox',
      '--disable-gpu',
      '--disable-quic',
      '--no-first-run',
      '--disable-background-networking',
    ],
  });
  const streaming = load(service.url, fleet.gateways, SETTLED + MINUTES * 60 + 20);
  try {
    const page = await browser.newPage({ viewport: { width: 1280, height: 900 } });
    await signIn(page, service.url);
    await page
      .locator('article')
      .nth(AXES - 1)
      .waitFor({ state: 'attached', timeout: 60_000 });
    await page.waitForTimeout(SETTLED * 1000);
    const devtools = await page.context().newCDPSession(page);
    await devtools.send('Performance.enable');
    await watchLongTasks(page);
    const heaps = [await heapMiB(devtools)];
    const from = await cpuSeconds(devtools);
    const started = performance.now();
    let inScrolling = 0;
    for (let minute = 0; minute < MINUTES; minute++) {
      const before = await cpuSeconds(devtools);
      const end = performance.now() + SCROLLED * 1000;
      let down = true;
      while (performance.now() < end) {
        await page.mouse.wheel(0, down ? 240 : -240);
        await page.waitForTimeout(50);
        if (await page.evaluate((way) => atEnd(way), down)) down = !down;
      }
      inScrolling += (await cpuSeconds(devtools)) - before;
      await page.waitForTimeout((60 - SCROLLED) * 1000);
      heaps.push(await heapMiB(devtools));
    }
    const cores = ((await cpuSeconds(devtools)) - from) / ((performance.now() - started) / 1000);
    const tasks = await page.evaluate(() => window.longTasks);
    const name = `fleet page of ${AXES} axes, ${MINUTES} min`;
    const last = heaps.at(-1)!;
    return [
      {
        name: `${name}: longest task while values arrive and it scrolls`,
        value: round(Math.max(0, ...tasks)),
        unit: 'ms',
        floor: LONGEST_TASK,
        ratio: round(Math.max(0, ...tasks) / LONGEST_TASK),
        note: `${tasks.length} tasks over ${LONGEST_TASK} ms; 0 means none: the browser names no shorter ones. Floor: what is asked of it`,
      },
      {
        name: `${name}: share of a core of the page's process`,
        value: round(cores),
        unit: 'cores',
        floor: CORE,
        ratio: round(cores / CORE),
        note: `while scrolling ${round(inScrolling / (MINUTES * SCROLLED))}; floor: what is asked of it`,
      },
      {
        name: `${name}: heap after a collection`,
        value: round(last),
        unit: 'MiB',
        floor: round(heaps[Math.min(3, MINUTES)]!),
        ratio: round(last / heaps[Math.min(3, MINUTES)]!),
        note: `minute by minute ${heaps.map((heap) => heap.toFixed(1)).join(', ')}; floor: after three minutes, when the two minutes of every strip are there`,
      },
    ];
  } finally {
    await browser.close();
    await service.stop();
    await streaming;
    rmSync(fleet.folder, { recursive: true, force: true });
  }
}

declare global {
  interface Window {
    longTasks: number[];
  }
  var atEnd: (down: boolean) => boolean;
}

async function signIn(page: Page, url: string): Promise<void> {
  await page.goto(`${url}/sign-in`);
  await page.getByLabel('Mail address').fill('engineer@tarnwick.example');
  await page.getByLabel('Password', { exact: true }).fill(DEMO_PASSWORD);
  await page.getByRole('button', { name: 'Sign in', exact: true }).click();
  await page.getByRole('heading', { name: 'Fleet' }).waitFor();
}

/** Tasks of 50 ms and more, by W3C Long Tasks. */
const watchLongTasks = (page: Page): Promise<void> =>
  page.evaluate(() => {
    window.longTasks = [];
    window.atEnd = (down) =>
      down ? scrollY + innerHeight >= document.documentElement.scrollHeight - 2 : scrollY <= 0;
    new PerformanceObserver((list) =>
      window.longTasks.push(...list.getEntries().map(({ duration }) => duration)),
    ).observe({ type: 'longtask' });
  });

/** CPU time of the page's process so far, s. */
async function cpuSeconds(devtools: CDPSession): Promise<number> {
  const { metrics } = await devtools.send('Performance.getMetrics');
  return metrics.find(({ name }) => name === 'ProcessTime')!.value;
}

async function heapMiB(devtools: CDPSession): Promise<number> {
  await devtools.send('HeapProfiler.collectGarbage');
  const { usedSize } = await devtools.send('Runtime.getHeapUsage');
  return usedSize / 2 ** 20;
}
