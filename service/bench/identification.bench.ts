import { identifyRecord, type MotionRecord } from '../src/identification/identify-record.js';
import { motionOf } from '../src/identification/motion-record.js';
import { OnlineIdentifier } from '../src/identification/online-identifier.js';
import { randomAxis, TestAxis, type AxisRecord } from '../test/identification/test-axis.js';
import { bestMs, bestMsOfBoth, pythonNumber, round, type BenchRecord } from './measure.js';

/** 60 s at 1 kHz of an axis in production. */
function production(): { record: AxisRecord; gain: number; pole: number } {
  const { setup, gain, pole } = randomAxis(5, { sampleTime: 0.001, dwell: 0.4 });
  return { record: new TestAxis(setup).run(60), gain, pole };
}

/**
 * The floor of online identification: the same signals (velocity, its sign over a span, three outputs weighed by the
 * hold and their slopes), six third-order filters and 28 sums of products, summed every eighth moving sample as the
 * identifier does at this pole, in one loop over the record's arrays.
 */
export function bareFilters(position: Int32Array, output: Int16Array, stride: number): number {
  const sums = new Float64Array(28);
  const g = 0.03;
  const [span, reach, d] = [9, 5, 1];
  const [n1, n2, n3, m1, m2, m3, newer, older] = [0.2, 0.6, 0.2, 300, 20, -320, 0.5, 0.5];
  let [v1, v2, v3, a1, a2, a3, b1, b2, b3] = [0, 0, 0, 0, 0, 0, 0, 0, 0];
  let [c1, c2, c3, e1, e2, e3, h1, h2, h3] = [0, 0, 0, 0, 0, 0, 0, 0, 0];
  let [sf0, sr0] = [0, 0];
  let phase = 0;
  for (let k = span; k < position.length; k++) {
    const counts = position[k]! - position[k - span]!;
    const i = k - reach;
    const v = (position[i + 1]! - position[i]!) * 2;
    const uNew = output[i - d]! * 0.01;
    const uOld = output[i - d - 1]! * 0.01;
    const uOlder = output[i - d - 2]! * 0.01;
    const u = n1 * uNew + n2 * uOld + n3 * uOlder;
    const moving = counts >= 3 || counts <= -3;
    const sf = counts >= 3 ? 1 : 0;
    const sr = counts <= -3 ? 1 : 0;
    const du = moving ? m1 * uNew + m2 * uOld + m3 * uOlder : 0;
    const before = v3;
    v1 += g * (v - v1);
    v2 += g * (v1 - v2);
    v3 += g * (v2 - v3);
    a1 += g * (u * sf - a1);
    a2 += g * (a1 - a2);
    a3 += g * (a2 - a3);
    b1 += g * (u * sr - b1);
    b2 += g * (b1 - b2);
    b3 += g * (b2 - b3);
    c1 += g * (newer * sf + older * sf0 - c1);
    c2 += g * (c1 - c2);
    c3 += g * (c2 - c3);
    e1 += g * (newer * sr + older * sr0 - e1);
    e2 += g * (e1 - e2);
    e3 += g * (e2 - e3);
    h1 += g * (du - h1);
    h2 += g * (h1 - h2);
    h3 += g * (h2 - h3);
    sf0 = sf;
    sr0 = sr;
    if (!moving || ++phase < stride) continue;
    phase = 0;
    const D = v3 - before;
    sums[0]! += before * before;
    sums[1]! += before * a3;
    sums[2]! += before * b3;
    sums[3]! += before * c3;
    sums[4]! += before * e3;
    sums[5]! += before * h3;
    sums[6]! += before * D;
    sums[7]! += a3 * a3;
    sums[8]! += a3 * b3;
    sums[9]! += a3 * c3;
    sums[10]! += a3 * e3;
    sums[11]! += a3 * h3;
    sums[12]! += a3 * D;
    sums[13]! += b3 * b3;
    sums[14]! += b3 * c3;
    sums[15]! += b3 * e3;
    sums[16]! += b3 * h3;
    sums[17]! += b3 * D;
    sums[18]! += c3 * c3;
    sums[19]! += c3 * e3;
    sums[20]! += c3 * h3;
    sums[21]! += c3 * D;
    sums[22]! += e3 * e3;
    sums[23]! += e3 * h3;
    sums[24]! += e3 * D;
    sums[25]! += h3 * h3;
    sums[26]! += h3 * D;
    sums[27]! += D * D;
  }
  return sums[0]! + sums[27]!;
}

/**
 * The same separable problem with SciPy: per window the responses by scipy.signal.lfilter, start and linear parameters
 * by numpy.linalg.lstsq, α and τ by scipy.optimize.least_squares, from the same search for a start (14 × 4 points).
 */
const SCIPY = `
import json, sys, time, math
import numpy as np
from scipy.signal import lfilter
from scipy.optimize import least_squares
q = json.load(sys.stdin)
T = q['T']; y = np.array(q['y']); u = np.array(q['u']); W = q['windows']
def columns(w, alpha, tau):
    a, b, s = w; d = int(tau/T+1e-9); phi = tau-d*T; n = b-a
    rise = lambda t: -math.expm1(-alpha*t)
    late, rest = phi, T-phi; rl, rr = rise(late), rise(rest)
    idx = np.arange(a, b)-d
    new = u[np.maximum(idx, 0)]; old = u[np.maximum(idx-1, 0)]
    v = lfilter([0, 1], [1, -(1-rise(T))], rl*(1-rr)*old+rr*new)
    dp = rise(T)/alpha*v+(late-rl/alpha+rl*rr/alpha)*old+(rest-rr/alpha)*new
    x = np.concatenate([[0], np.cumsum(dp)[:-1]])
    t = np.arange(n)*T; f = -np.expm1(-alpha*t)/alpha
    N = np.column_stack([np.ones(n), f]); Q, _ = np.linalg.qr(N)
    M = np.column_stack([x, -s*(t-f)*(s > 0), -s*(t-f)*(s < 0), y[a:b]])
    return M-Q@(Q.T@M)
def residual(p):
    M = np.vstack([columns(w, p[0], p[1]) for w in W])
    th = np.linalg.lstsq(M[:, :3], M[:, 3], rcond=None)[0]
    return M[:, 3]-M[:, :3]@th
some = sorted(W, key=lambda w: w[0]-w[1])[:q['some']]
def run():
    global W
    whole = W; W = some; best = None
    for i in range(14):
        al = 0.3*1.8**i
        if al*T > 1: break
        for d in (0, 2, 5, 10):
            r = residual((al, d*T)); s = r@r
            if best is None or s < best[0]: best = (s, al, d*T)
    W = whole
    return least_squares(residual, best[1:], x_scale=(best[1], T), bounds=([0.05, 0], [600, 0.06]))
t0 = time.perf_counter(); run(); t1 = time.perf_counter()
print(1000*(t1-t0))
`;

export default async function identificationBench(): Promise<BenchRecord[]> {
  const { record, gain, pole } = production();
  const { position, output, sampleTime, resolution } = record;
  const samples = position.length;
  const stride = Math.max(1, Math.floor(0.25 / (Math.max(pole, 30) * sampleTime)));
  // Axes of all kinds first: the compiler must have seen what a service sees.
  for (let seed = 20; seed < 30; seed++) {
    const { setup, ...plant } = randomAxis(seed);
    const other = new TestAxis(setup).run(30);
    const identifier = new OnlineIdentifier({ ...plant, ...other });
    for (let pass = 0; pass < 3; pass++)
      identifier.push(other.position, other.output, 0, other.position.length);
  }
  const identifier = new OnlineIdentifier({ gain, pole, sampleTime, resolution });
  const [online, bare] = bestMsOfBoth(
    () => {
      identifier.gap();
      identifier.push(position, output, 0, samples);
    },
    () => bareFilters(position, output, stride),
    250,
  );

  const motion: MotionRecord = {
    sampleTime,
    position: Float64Array.from(position, (counts) => counts * resolution),
    output: Float64Array.from(output, (hundredths) => hundredths / 100),
  };
  const offline = bestMs(() => identifyRecord(motion), 10);
  const { windows } = motionOf(motion);
  const scipy = await pythonNumber(
    SCIPY,
    JSON.stringify({
      T: sampleTime,
      y: [...motion.position],
      u: [...motion.output],
      windows: windows.map(({ from, to, direction }) => [from, to, direction]),
      some: 8,
    }),
  );
  return [
    {
      name: 'identification-online',
      value: round((1e6 * online) / samples),
      unit: 'ns/sample',
      floor: round((1e6 * bare) / samples),
      ratio: round(online / bare),
      note: 'floor: the same filters and sums in one bare loop',
    },
    {
      name: 'identification-record-60s-1kHz',
      value: round(offline),
      unit: 'ms',
      floor: scipy === null ? null : round(scipy),
      ratio: scipy === null ? null : round(offline / scipy),
      note:
        scipy === null
          ? 'SciPy not installed: comparison skipped'
          : 'floor: one fit of the same regressors by SciPy; ours has up to four',
    },
  ];
}
