import { spawn, type ChildProcess } from 'node:child_process';
import { once } from 'node:events';
import { mkdtempSync, rmSync } from 'node:fs';
import { createServer, type AddressInfo } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { chromium, type Browser, type Page } from 'playwright-core';

const root = fileURLToPath(new URL('../..', import.meta.url));
export type Person = 'viewer' | 'technician' | 'engineer' | 'approver' | 'admin';
const PASSWORD = 'polewright-demo';

/** The real thing for browser tests: service, simulator without its schedule, mail fake, Chromium. */
export class Polewright {
  private constructor(
    readonly address: string,
    readonly simulator: string,
    readonly browser: Browser,
    private readonly children: ChildProcess[],
    private readonly folder: string,
  ) {}

  static async start(): Promise<Polewright> {
    const [service, simulator, smtp, inbox] = (await freePorts(4)) as [number, number, number, number];
    const folder = mkdtempSync(join(tmpdir(), 'polewright-e2e-'));
    const env = {
      ...process.env,
      PORT: String(service),
      DATA_DIR: folder,
      DEMO: '1',
      SERVICE_URL: `http://127.0.0.1:${service}`,
      PUBLIC_URL: `http://127.0.0.1:${service}`,
      GATEWAY_TOKENS_FILE: join(folder, 'gateway-tokens.json'),
      SIMULATOR_PORT: String(simulator),
      SCHEDULE: 'none',
      SEED: '7',
      SMTP_URL: `smtp://127.0.0.1:${smtp}`,
      MAIL_SMTP_PORT: String(smtp),
      MAIL_HTTP_PORT: String(inbox),
      MAIL_INBOX_URL: `http://127.0.0.1:${inbox}`,
    };
    const children = ['simulator/dist/mail-fake.js', 'service/dist/main.js', 'simulator/dist/main.js'].map(
      (script) =>
        spawn(process.execPath, [join(root, script)], { env, stdio: ['ignore', 'ignore', 'inherit'] }),
    );
    const browser = await chromium.launch({
      executablePath: process.env.CHROMIUM ?? '/usr/bin/chromium',
      headless: true,
      args: [
        '--no-sandbox',
        '--disable-gpu',
        '--disable-quic',
        '--no-first-run',
        '--disable-background-networking',
        '--disable-component-update',
        '--disable-sync',
      ],
    });
    const address = `http://127.0.0.1:${service}`;
    const polewright = new Polewright(address, `http://127.0.0.1:${simulator}`, browser, children, folder);
    await until('the service is ready', async () => (await fetch(`${address}/health/ready`)).ok);
    await until('the simulator answers', async () => (await fetch(`${polewright.simulator}/health`)).ok);
    return polewright;
  }

  async stop(): Promise<void> {
    await this.browser.close();
    for (const child of this.children) {
      if (child.exitCode !== null) continue;
      const ended = once(child, 'exit');
      child.kill('SIGTERM');
      await ended;
    }
    rmSync(this.folder, { recursive: true, force: true });
  }

  /** A page of a person who has signed in by the sign-in page. */
  async pageOf(person: Person, width = 1280): Promise<Page> {
    const context = await this.browser.newContext({ viewport: { width, height: width < 500 ? 740 : 900 } });
    const page = await context.newPage();
    page.setDefaultTimeout(20_000);
    await page.goto(`${this.address}/sign-in`);
    await page.getByLabel('Mail address').fill(`${person}@tarnwick.example`);
    await page.getByLabel('Password', { exact: true }).fill(PASSWORD);
    await page.getByRole('button', { name: 'Sign in', exact: true }).click();
    await page.getByRole('heading', { name: 'Fleet' }).waitFor();
    return page;
  }

  /** Makes a machine fail. */
  async fault(axis: string, kind: string, amount: number, rampSeconds = 0): Promise<void> {
    const response = await fetch(`${this.simulator}/faults`, {
      method: 'POST',
      headers: { 'content-type': 'application/json' },
      body: JSON.stringify({ axis, kind, amount, rampSeconds }),
    });
    if (!response.ok) throw new Error(`fault: ${response.status} ${await response.text()}`);
  }

  async heal(axis: string): Promise<void> {
    await fetch(`${this.simulator}/faults/${encodeURIComponent(axis)}`, { method: 'DELETE' });
  }

  /** Requests of a person by the API. */
  async api(person: Person): Promise<Api> {
    const response = await fetch(`${this.address}/api/v1/auth/sign-in`, {
      method: 'POST',
      headers: { 'content-type': 'application/json' },
      body: JSON.stringify({ email: `${person}@tarnwick.example`, password: PASSWORD }),
    });
    const { accessToken } = (await response.json()) as { accessToken: string };
    return new Api(`${this.address}/api/v1`, accessToken);
  }
}

export class Api {
  constructor(
    private readonly base: string,
    private readonly token: string,
  ) {}

  /** @returns the status and the JSON body */
  async request<T = Record<string, unknown>>(
    method: string,
    path: string,
    body?: unknown,
  ): Promise<{ status: number; body: T }> {
    const response = await fetch(this.base + path, {
      method,
      headers: {
        authorization: `Bearer ${this.token}`,
        ...(body !== undefined && { 'content-type': 'application/json' }),
      },
      ...(body !== undefined && { body: JSON.stringify(body) }),
    });
    const text = await response.text();
    return { status: response.status, body: (text ? JSON.parse(text) : null) as T };
  }

  async get<T>(path: string): Promise<T> {
    return (await this.request<T>('GET', path)).body;
  }
}

/** Asks again and again until it holds; says what never came true. */
export async function until(what: string, holds: () => Promise<boolean>, seconds = 60): Promise<void> {
  const end = Date.now() + seconds * 1000;
  let last: unknown;
  while (Date.now() < end) {
    try {
      if (await holds()) return;
      last = undefined;
    } catch (error) {
      last = error;
    }
    await new Promise((done) => setTimeout(done, 300));
  }
  throw new Error(`After ${seconds} s still not: ${what}${last ? ` (${String(last)})` : ''}`);
}

async function freePorts(count: number): Promise<number[]> {
  const servers = await Promise.all(
    Array.from({ length: count }, async () => {
      const server = createServer().listen(0, '127.0.0.1');
      await once(server, 'listening');
      return server;
    }),
  );
  const ports = servers.map((server) => (server.address() as AddressInfo).port);
  for (const server of servers) server.close();
  return ports;
}
