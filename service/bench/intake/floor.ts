/**
 * The floor of intake: a bare socket.io server that answers the same messages and runs the same filters and sums in
 * two plain loops; nothing is kept, nothing is stored. It prints its address, then answers `cost` with its CPU time.
 */
import { createServer } from 'node:http';
import type { AddressInfo } from 'node:net';
import { Server } from 'socket.io';
import { decodeFrame, MAX_FRAME_BYTES } from '../../src/telemetry/frame-codec.js';
import { bareFilters } from '../identification.bench.js';

const LOW = 0.05;
const AT_LIMIT = 9_990;
let kept = 0;

/** What a second and a move are made of: errors, their squares and peaks, two high-passes of the output. */
function bareSums(target: Int32Array, position: Int32Array, output: Int16Array): number {
  let [peak, squares, squaresOut, saturated, low1, low2, activity, crossings, changes] = [
    0, 0, 0, 0, 0, 0, 0, 0, 0,
  ];
  let [lastTarget, lastPosition, velocity, since, sign] = [target[0]!, position[0]!, 0, 0, 0];
  for (let i = 0; i < target.length; i++) {
    const r = target[i]!;
    const y = position[i]!;
    const u = output[i]!;
    since = r === lastTarget ? since + 1 : 0;
    velocity += LOW * (y - lastPosition - velocity);
    if (r !== lastTarget) changes++;
    lastTarget = r;
    lastPosition = y;
    const error = Math.abs(r - y);
    if (since <= 50 || Math.abs(velocity) > 0.2) {
      if (error > peak) peak = error;
      squares += error * error;
      if (Math.abs(u) >= AT_LIMIT) saturated++;
    }
    squaresOut += u * u;
    low1 += LOW * (u - low1);
    const high1 = u - low1;
    low2 += LOW * (high1 - low2);
    const high = high1 - low2;
    activity += high * high;
    const now = high > 0 ? 1 : -1;
    if (now !== sign) crossings++;
    sign = now;
  }
  return peak + squares + squaresOut + saturated + activity + crossings + changes;
}

const http = createServer();
const io = new Server(http, {
  serveClient: false,
  transports: ['websocket'],
  perMessageDeflate: false,
  maxHttpBufferSize: MAX_FRAME_BYTES,
});
io.of('/telemetry').on('connection', (socket) => {
  socket.on('hello', (hello: { axes: string[] }, answer: (body: object) => void) =>
    answer({ axes: hello.axes.map((tag, index) => ({ tag, index })), durableSequence: 0, unknown: [] }),
  );
  socket.on('frames', (message: Uint8Array, answer: (body: object) => void) => {
    const { sequence, blocks } = decodeFrame(message);
    for (const { target, position, output } of blocks)
      kept += bareSums(target, position, output) + bareFilters(position, output, 8);
    answer({ received: sequence });
  });
});
process.on('message', () => {
  const { user, system } = process.cpuUsage();
  process.send!({ cpuSeconds: (user + system) / 1e6, kept: kept > 0 });
});
http.listen(0, '127.0.0.1', () =>
  process.send!({ url: `http://127.0.0.1:${(http.address() as AddressInfo).port}` }),
);
