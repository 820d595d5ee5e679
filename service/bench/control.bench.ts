import { design, type DesignQuestion } from '../src/control/design.js';
import { lambdaLimits, type LimitQuestion } from '../src/control/limits.js';
import { simulateMove } from '../src/control/move.js';
import { placeGains } from '../src/control/pole-placement.js';
import { bestMs, pythonNumber, round, type BenchRecord } from './measure.js';

const questions: DesignQuestion[] = [
  { gain: 8, pole: 25, lambda: 40 },
  { gain: 5.2, pole: 75, lambda: 90 },
  { gain: 3.6, pole: 160, lambda: 120 },
  { gain: 15, pole: 195, lambda: 60 },
  { gain: 30, pole: 12.5, lambda: 15 },
].flatMap(({ gain, pole, lambda }) =>
  (['PID', 'PI-D', 'I-PD'] as const).map((structure) => ({
    plant: { gain, pole },
    structure,
    pattern: { kind: 'triple' as const, lambda },
    feedForward: false,
    controller: { sampleTime: 0.001, resolution: 0.001 },
    move: { distance: 40, duration: 1, settle: 1, profile: 'raised-cosine' as const },
  })),
);

/** The bare recursion of a move in one loop: what simulating it costs at least. */
function bareMove(samples: number, position: Float64Array, output: Float64Array): number {
  const [kp, ki, kd, T] = [24, 320, 0.475, 0.001];
  const a = Math.exp(-25 * T);
  const p12 = (1 - a) / 25;
  const [g1, g2] = [8 * (T - p12), 8 * (1 - a)];
  let [y, v, sum, last] = [0, 0, 0, 0];
  for (let k = 0; k < samples; k++) {
    const r = k < 1000 ? 20 * (1 - Math.cos(Math.PI * k * T)) : 40;
    const P = kp * (r - y);
    const D = (-kd * (y - last)) / T;
    last = y;
    sum = Math.min(Math.max(sum + ki * T * (r - y), -100 - P - D), 100 - P - D);
    const u = Math.min(Math.max(P + sum + D, -100), 100);
    position[k] = y;
    output[k] = u;
    y += p12 * v + g1 * u;
    v = a * v + g2 * u;
  }
  return y;
}

/**
 * The same answers with NumPy and SciPy: roots, frequency response by signal.freqresp, margins and Ms from its
 * grid, step by signal.step, sampled eigenvalues, ripple by solve_discrete_lyapunov, the move in a Python loop.
 * The search for the largest stable sample time is bisection on the eigenvalues.
 */
const SCIPY = `
import json, sys, time, math
import numpy as np
from scipy import signal, linalg
def sampled(K, a, kp, ki, kd, T):
    E = math.exp(-a*T); p = (1-E)/a; g1 = K*(T-p); g2 = K*(1-E); c = kp+ki*T+kd/T
    u = np.array([-c, 0, 1, kd/T])
    A = np.array([[1, p, 0, 0], [0, E, 0, 0], [-ki*T, 0, 1, 0], [1, 0, 0, 0]]) + np.outer([g1, g2, 0, 0], u)
    return A, np.array([-g1*c, -g2*c, -ki*T, 1]), u, c
def design(q):
    K, a = q['plant']['gain'], q['plant']['pole']; l = q['pattern']['lambda']; b = K*a
    kp, ki, kd = 3*l*l/b, l**3/b, (3*l-a)/b; T = 0.001
    beta, gamma = (0 if q['structure'] == 'I-PD' else 1), (1 if q['structure'] == 'PID' else 0)
    den = [1, a+b*kd, b*kp, b*ki]; num = [b*gamma*kd, b*beta*kp, b*ki]
    poles, zeros = np.roots(den), np.roots(num)
    w = np.logspace(-1, math.log10(math.pi/T), 200)
    L = signal.freqresp(signal.TransferFunction([b*kd, b*kp, b*ki], [1, a, 0, 0]), w)[1]
    G = signal.freqresp(signal.TransferFunction(num, den), w)[1]
    ms = np.max(1/np.abs(1+L)); phase = np.unwrap(np.angle(L)); peak = np.max(np.abs(G))
    t, y = signal.step(signal.TransferFunction(num, den), N=2000)
    over = y.max()-1; settle = t[np.nonzero(np.abs(y-1) > 0.02)[0][-1]]
    A, B, u, c = sampled(K, a, kp, ki, kd, T)
    z = np.linalg.eigvals(A); X = linalg.solve_discrete_lyapunov(A, np.outer(B, B)); ripple = math.sqrt(u@X@u+c*c)
    lo, hi = 1e-5, 1e-5
    while max(abs(np.linalg.eigvals(sampled(K, a, kp, ki, kd, hi)[0]))) < 1: lo, hi = hi, hi*1.1
    for _ in range(40):
        m = (lo+hi)/2
        if max(abs(np.linalg.eigvals(sampled(K, a, kp, ki, kd, m)[0]))) < 1: lo = m
        else: hi = m
    E = math.exp(-a*T); p = (1-E)/a; g1 = K*(T-p); g2 = K*(1-E); y = v = I = last = 0.0; out = []
    for k in range(2000):
        r = 20*(1-math.cos(math.pi*k*T)) if k < 1000 else 40.0
        P = kp*(beta*r-y); wd = gamma*r-y; D = kd*(wd-last)/T; last = wd
        I = min(max(I+ki*T*(r-y), -100-P-D), 100-P-D); x = min(max(P+I+D, -100), 100); out.append((r, y, x))
        y, v = y+p*v+g1*x, E*v+g2*x
    return len(out)
qs = json.load(sys.stdin)
for q in qs: design(q)
best = math.inf; end = time.perf_counter()+4
while time.perf_counter() < end:
    t = time.perf_counter()
    for q in qs: design(q)
    best = min(best, time.perf_counter()-t)
print(len(qs)/best)
`;

/** Figures of the control core: designs per second, one move, the limits of one axis. */
export default async function controlBench(): Promise<BenchRecord[]> {
  const rate = (1000 * questions.length) / bestMs(() => questions.forEach((q) => design(q)), 100);
  const scipy = await pythonNumber(SCIPY, JSON.stringify(questions));

  const plant = { gain: 8, pole: 25 };
  const gains = placeGains(plant, 'PI-D', { kind: 'triple', lambda: 40 }, false);
  const move = { distance: 40, duration: 1, settle: 1, profile: 'raised-cosine' as const };
  const moveMs = bestMs(() => simulateMove(plant, gains, 'PI-D', { sampleTime: 0.001 }, move), 300);
  const bareMs = bestMs(() => bareMove(2000, new Float64Array(2000), new Float64Array(2000)), 300);

  const axis: LimitQuestion = {
    plant: { ...plant, coulomb: 3, bias: 1 },
    region: { gain: { low: 7.8, high: 8.2 }, pole: { low: 23, high: 27 } },
    structure: 'PI-D',
    pattern: { kind: 'triple', lambda: 40 },
    feedForward: true,
    controller: { sampleTime: 0.001, resolution: 0.001 },
    move: { distance: 200, duration: 1.5, profile: 'raised-cosine' },
    tolerances: { followingError: 1 },
  };
  const limitsMs = bestMs(() => lambdaLimits(axis), 9);
  // every λ of the coarse search on the estimate and its four corners, nothing but the bare move
  const limitsFloor = (19 * 5 * bareMs * 2500) / 2000;

  return [
    {
      name: 'design-full-answer',
      value: round(rate),
      unit: 'designs/s',
      floor: scipy === null ? null : round(scipy),
      ratio: scipy === null ? null : round(rate / scipy),
      note: scipy === null ? 'SciPy not installed: comparison skipped' : 'floor: the same set by SciPy',
    },
    {
      name: 'move-2s-1kHz',
      value: round(moveMs),
      unit: 'ms',
      floor: round(bareMs),
      ratio: round(moveMs / bareMs),
    },
    {
      name: 'lambda-limits-2.5s-1kHz',
      value: round(limitsMs),
      unit: 'ms',
      floor: round(limitsFloor),
      ratio: round(limitsMs / limitsFloor),
    },
  ];
}
