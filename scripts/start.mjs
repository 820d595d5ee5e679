// `npm start`: installs and builds what is missing, then runs service, simulator and mail fake until Ctrl-C.
import { spawn } from 'node:child_process';
import { once } from 'node:events';
import { createServer } from 'node:net';
import { join, resolve } from 'node:path';
import { build, checkNode, fail, install, root } from './workspace.mjs';

checkNode();
const port = Number(process.env.PORT ?? 4600);
if (!Number.isInteger(port) || port < 1 || port > 65_532)
  fail(`PORT is "${process.env.PORT}"; it must be a whole number from 1 to 65532.`);
const demo = (process.env.DEMO ?? '1') !== '0';
const dataDir = resolve(process.env.DATA_DIR ?? join(root, 'data'));
const ports = {
  service: port,
  simulator: Number(process.env.SIMULATOR_PORT ?? port + 1),
  smtp: Number(process.env.MAIL_SMTP_PORT ?? port + 2),
  inbox: Number(process.env.MAIL_HTTP_PORT ?? port + 3),
};
const ownMail = process.env.SMTP_URL === undefined;
await requireFree(ports.service, 'PORT');
if (demo) await requireFree(ports.simulator, 'SIMULATOR_PORT');
if (ownMail) {
  await requireFree(ports.smtp, 'MAIL_SMTP_PORT');
  await requireFree(ports.inbox, 'MAIL_HTTP_PORT');
}
install();
build();

const address = process.env.PUBLIC_URL ?? `http://localhost:${port}`;
const env = {
  ...process.env,
  PORT: String(port),
  DATA_DIR: dataDir,
  DEMO: demo ? '1' : '0',
  SERVICE_URL: `http://127.0.0.1:${port}`,
  GATEWAY_TOKENS_FILE: join(dataDir, 'gateway-tokens.json'),
  SIMULATOR_PORT: String(ports.simulator),
  MAIL_SMTP_PORT: String(ports.smtp),
  MAIL_HTTP_PORT: String(ports.inbox),
  ...(ownMail && { SMTP_URL: `smtp://127.0.0.1:${ports.smtp}` }),
  MAIL_INBOX_URL: `http://127.0.0.1:${ports.inbox}`,
};
const children = new Map();
let stopping = false;

if (ownMail) run('mail fake', 'simulator/dist/mail-fake.js');
run('service', 'service/dist/main.js');
await ready();
if (demo) run('simulator', 'simulator/dist/main.js');

console.log(`\nPolewright is at ${address}`);
if (demo) {
  console.log(
    `\nSign in as viewer@, technician@, engineer@, approver@ or admin@tarnwick.example, password polewright-demo`,
  );
  console.log(`Mails of the demo: ${address}/admin/mail`);
}
console.log('\nCtrl-C stops everything.');

process.on('SIGINT', () => stop(0));
process.on('SIGTERM', () => stop(0));

function run(name, script) {
  const child = spawn(process.execPath, [join(root, script)], {
    cwd: root,
    env,
    stdio: ['ignore', 'inherit', 'inherit'],
  });
  children.set(name, child);
  child.on('exit', (code, signal) => {
    children.delete(name);
    if (stopping) return;
    console.error(`\nThe ${name} ended by itself (${signal ?? `code ${code}`}); stopping the rest.`);
    void stop(1);
  });
}

async function ready() {
  for (let i = 0; i < 300 && !stopping; i++) {
    const answer = await fetch(`http://127.0.0.1:${port}/health/ready`).catch(() => null);
    if (answer?.ok) return;
    await new Promise((done) => setTimeout(done, 100));
  }
  if (!stopping) {
    console.error('\nThe service did not become ready within 30 s.');
    await stop(1);
  }
}

/** The simulator first, so that the service takes its last samples; then the service; each has 10 s. */
async function stop(code) {
  if (stopping) return;
  stopping = true;
  for (const name of ['simulator', 'service', 'mail fake']) {
    const child = children.get(name);
    if (!child) continue;
    const ended = once(child, 'exit');
    child.kill('SIGTERM');
    const timer = setTimeout(() => child.kill('SIGKILL'), 10_000);
    await ended;
    clearTimeout(timer);
  }
  process.exit(code);
}

function requireFree(number, name) {
  return new Promise((done) => {
    const server = createServer();
    server.once('error', (error) =>
      fail(
        error.code === 'EADDRINUSE'
          ? `Port ${number} is taken. Stop what uses it, or set ${name} to another one.`
          : `Port ${number} cannot be used: ${error.message}`,
      ),
    );
    server.listen(number, '127.0.0.1', () => server.close(done));
  });
}
