import { readFileSync } from 'node:fs';
import { Axis } from './axis.js';
import { faultControl } from './fault-control.js';
import { Gateway, GATEWAY_DEFAULTS, wallClock } from './gateway.js';
import { serveLoopback } from './loopback-server.js';
import { numberSetting, stopOnSignals } from './process-settings.js';
import { TARNWICK_AXES, TARNWICK_GATEWAYS, TARNWICK_SCHEDULE } from './tarnwick.js';

/**
 * The machines of Tarnwick Tileworks as a process of its own. Environment: SERVICE_URL, GATEWAY_TOKENS_FILE,
 * SIMULATOR_PORT, SCHEDULE (default | none), SEED, KEEP_SECONDS.
 */
const log = (message: string): void => console.log(`simulator: ${message}`);

const { env } = process;
const url = (env.SERVICE_URL ?? 'http://127.0.0.1:4600').replace(/\/$/, '');
const tokensFile = env.GATEWAY_TOKENS_FILE ?? 'data/gateway-tokens.json';
const port = numberSetting(env, 'SIMULATOR_PORT', 4601, 0, 65_535);
const seed = numberSetting(env, 'SEED', 1, 0, 2 ** 31 - 1);
const keepSeconds = numberSetting(env, 'KEEP_SECONDS', GATEWAY_DEFAULTS.keepSeconds, 1, 86_400);
const schedule = env.SCHEDULE ?? 'default';
if (schedule !== 'default' && schedule !== 'none') {
  console.error(`simulator: SCHEDULE is "${schedule}"; it must be default or none`);
  process.exit(1);
}

/** The tokens that the service has given its gateways; empty while the file is not there or not complete. */
function readTokens(): Record<string, string> {
  try {
    return { ...(JSON.parse(readFileSync(tokensFile, 'utf8')) as Record<string, string> | null) };
  } catch {
    return {};
  }
}

const axes = TARNWICK_AXES.map((make) => ({ axis: new Axis(make, seed), gateway: make.gateway }));
if (schedule === 'default')
  for (const { axis } of axes)
    axis.scheduled.push(...TARNWICK_SCHEDULE.filter(({ tag }) => tag === axis.make.tag));

const gateways = TARNWICK_GATEWAYS.map(({ name }) => ({
  name,
  gateway: new Gateway(
    axes.filter(({ gateway }) => gateway === name).map(({ axis }) => axis),
    {
      ...GATEWAY_DEFAULTS,
      name,
      url,
      keepSeconds,
      token: () => readTokens()[name] ?? '',
      now: wallClock,
      log,
    },
  ),
}));

const control = await serveLoopback(port, faultControl(axes, gateways)).catch((error: Error) => {
  console.error(
    `simulator: port ${port} cannot be used (${error.message}); set SIMULATOR_PORT to a free one`,
  );
  process.exit(1);
});
log(`${axes.length} axes; faults on http://127.0.0.1:${control.port}; seed ${seed}, schedule ${schedule}`);

/** Each gateway starts as soon as its token is there. */
const waiting = new Set(gateways);
let told = false;
function startGateways(): void {
  const tokens = readTokens();
  for (const each of waiting)
    if (tokens[each.name]) {
      each.gateway.start();
      waiting.delete(each);
    }
  if (waiting.size === 0) clearInterval(starting);
  else if (!told) log(`waiting for ${tokensFile}`);
  told = true;
}
const starting = setInterval(startGateways, 500);
startGateways();

stopOnSignals(async () => {
  clearInterval(starting);
  for (const { gateway } of gateways) gateway.stop();
  await control.close();
});
