/**
 * A load process: several gateways that stream in real time over the real protocol. It is told what to do by its
 * first argument (`LoadOrder` as JSON) and prints one line of JSON (`LoadResult`) at the end.
 */
import { FakeGateway } from '../../test/support/fake-gateway.js';
import { ProductionAxis } from '../../test/support/production-axis.js';
import { blockBytes, encodeFrame } from '../../src/telemetry/frame-codec.js';

export interface LoadOrder {
  url: string;
  gateways: { token: string; tags: string[] }[];
  seconds: number;
}

export interface LoadResult {
  samplesSent: number;
  samplesTaken: number;
  refused: number;
  /** Most the sender itself was behind its own clock, ms: the load was real time only while this is small. */
  lateMs: number;
}

const STEP_US = 1_000;
const PER_MESSAGE = 100;
const PERIOD_MS = (PER_MESSAGE * STEP_US) / 1000;
const LOOP_MESSAGES = 100;

const order = JSON.parse(process.argv[2]!) as LoadOrder;
const result: LoadResult = { samplesSent: 0, samplesTaken: 0, refused: 0, lateMs: 0 };
// Ten seconds of production, again and again; encoding is not what is measured, so only the times are written anew.
const production = new ProductionAxis(
  { gain: 12, pole: 20, coulomb: 2 },
  { kp: 8, ki: 60, kd: 0.3, kv: 1 / 12, ka: 1 / 240 },
  STEP_US,
  0.01,
).run(0, (LOOP_MESSAGES * PERIOD_MS) / 1000);
const templates = new Map<number, Uint8Array[]>();

function templatesFor(axes: number): Uint8Array[] {
  const made = Array.from({ length: LOOP_MESSAGES }, (_, m) => {
    const part = [m * PER_MESSAGE, (m + 1) * PER_MESSAGE] as const;
    return encodeFrame({
      sequence: 1,
      blocks: Array.from({ length: axes }, (__, axisIndex) => ({
        ...production,
        axisIndex,
        target: production.target.subarray(...part),
        position: production.position.subarray(...part),
        output: production.output.subarray(...part),
      })),
    });
  });
  templates.set(axes, made);
  return made;
}

const gateways = await Promise.all(
  order.gateways.map(async ({ token, tags }) => {
    const gateway = await FakeGateway.connect(order.url, { token });
    await gateway.hello(tags, String(Date.now()));
    return { gateway, axes: tags.length, messages: templates.get(tags.length) ?? templatesFor(tags.length) };
  }),
);
const startMs = Date.now();
const total = Math.round((order.seconds * 1000) / PERIOD_MS);
const answers: Promise<void>[] = [];
for (let m = 0; m < total; m++) {
  const due = startMs + (m + 1) * PERIOD_MS;
  await new Promise((done) => setTimeout(done, Math.max(0, due - Date.now())));
  result.lateMs = Math.max(result.lateMs, Date.now() - due);
  const firstUs = BigInt((startMs + m * PERIOD_MS) * 1000);
  for (const { gateway, axes, messages } of gateways) {
    const bytes = messages[m % LOOP_MESSAGES]!;
    const view = new DataView(bytes.buffer);
    view.setBigUint64(8, BigInt(m + 1), true);
    for (let b = 0; b < axes; b++) view.setBigInt64(16 + b * blockBytes(PER_MESSAGE) + 16, firstUs, true);
    const samples = axes * PER_MESSAGE;
    result.samplesSent += samples;
    answers.push(
      gateway.socket
        .timeout(30_000)
        // Copied: other gateways write their own times into the same bytes.
        .emitWithAck('frames', Buffer.from(bytes))
        .then((answer: object) => {
          if ('received' in answer) result.samplesTaken += samples;
          else result.refused++;
        })
        .catch(() => undefined),
    );
  }
}
await Promise.all(answers);
for (const { gateway } of gateways) gateway.close();
console.log(JSON.stringify(result));
