import { closedLoopPoles, referenceTransfer } from './loop.js';
import { checkPlant, type Plant } from './plant.js';
import { checkGains, type Gains, type Structure } from './pole-placement.js';

export interface StepFigures {
  /** Furthest rise above the final value, % of it; 0 when there is none. */
  overshootPct: number | null;
  /** When, s; null when there is no overshoot. */
  peakTime: number | null;
  /** Furthest excursion against the step, % of the final value; 0 without an inverse response. */
  undershootPct: number | null;
  /** From the first 10 % to the first 90 % of the final value, s. */
  riseTime: number | null;
  /** Last time the response is 2 % away from its final value, s. */
  settlingTime: number | null;
}

const NO_FIGURES: StepFigures = {
  overshootPct: null,
  peakTime: null,
  undershootPct: null,
  riseTime: null,
  settlingTime: null,
};

/** Excursions below this share of the final value are rounding of the exponentials, not a response. */
const NOTHING = 1e-11;
/** Smallest damping ratio that is still followed to its end; below it the loop counts as not settling. */
const LEAST_DAMPING = 1e-3;

/**
 * Figures of the linear, continuous, unit-step response of T(s) (`referenceTransfer`), without delays, clamp,
 * friction or resolution.
 *
 * The response is y(t) = y∞ + c·e^(At)·x₀ with A the companion matrix of the closed-loop denominator, evaluated
 * by the matrix exponential and therefore exact for repeated poles too. It is followed in steps of a fifth of
 * a radian of the fastest pole still alive, until every mode has decayed by e^(−40); between two points the
 * extremum (y' = 0) and every passage through 10 %, 90 % and 98 … 102 % is found by root finding on the exact
 * expression. No figure depends on a time grid: overshoot is against the final value y∞ = T(0), settling is the
 * *last* passage, undershoot exists only where y really goes below 0.
 *
 * Known answers: I-PD with a triple pole −λ has y = 1 − e^(−λt)(1 + λt + (λt)²/2), no overshoot, settling at
 * λt = 7.517; PI-D with a triple pole overshoots by 5e⁻³ at λt = 3 whatever α is.
 *
 * All null when the loop is not stable, when its slowest pole pair is damped less than 1e-3, or when T(0) = 0.
 *
 * @throws UnphysicalInputError naming the field
 */
export function stepFigures(plant: Plant, gains: Gains, structure: Structure): StepFigures {
  checkPlant(plant);
  checkGains(gains);
  const transfer = referenceTransfer(plant, gains, structure);
  const denominator = transfer.denominator;
  const n = denominator.length - 1;
  const final = transfer.numerator[0]! / denominator[0]!;
  if (!Number.isFinite(final) || final === 0) return NO_FIGURES;
  const poles = closedLoopPoles(plant, gains);
  const sizes = poles.map((p) => Math.hypot(p.re, p.im));
  if (poles.some((p, i) => p.re >= -LEAST_DAMPING * sizes[i]!)) return NO_FIGURES;

  // time in units of 1/σ, σ the geometric mean of the pole magnitudes: keeps the companion matrix even
  const sigma = denominator[0]! ** (1 / n);
  const d = denominator.map((c, i) => c * sigma ** (i - n));
  const b = Array.from(
    { length: n + 1 },
    (_, i) => ((transfer.numerator[i] ?? 0) / final) * sigma ** (i - n),
  );
  const jump = b[n]!;
  const c = Array.from({ length: n }, (_, i) => b[i]! - jump * d[i]!);
  const response = new ModalResponse(d, c);

  const modes = poles
    .map((p, i) => ({
      until: (40 * sigma) / -p.re,
      size: sizes[i]! / sigma,
      decay: -p.re / sigma,
      turn: Math.abs(p.im) / sigma,
    }))
    .sort((a, b) => a.until - b.until);
  const walk = new Walk(jump, response);
  let time = 0;
  modes.forEach((mode, i) => {
    if (mode.until <= time) return;
    const alive = modes.slice(i);
    const fastest = Math.max(...alive.map((m) => m.size));
    const steps = Math.max(1, Math.ceil((mode.until - time) / (0.2 / fastest)));
    const single = alive.every((m) => m.until === mode.until) && mode.turn > 0;
    walk.advance(time, (mode.until - time) / steps, steps, single ? mode : undefined);
    time = mode.until;
  });

  const rise = walk.first90 !== null && walk.first10 !== null ? walk.first90 - walk.first10 : null;
  return {
    overshootPct: walk.highest > NOTHING ? 100 * walk.highest : 0,
    peakTime: walk.highest > NOTHING ? walk.highestAt / sigma : null,
    undershootPct: walk.lowest < -NOTHING ? -100 * walk.lowest : 0,
    riseTime: rise === null ? null : rise / sigma,
    settlingTime: walk.settled() / sigma,
  };
}

/** x' = Ax with A the companion matrix of d, and the deviation e = c·x with its derivative e' = cA·x. */
class ModalResponse {
  readonly a: number[][];
  readonly slope: number[];
  private readonly norm: number;

  constructor(
    d: readonly number[],
    readonly c: readonly number[],
  ) {
    const n = c.length;
    this.a = Array.from({ length: n }, (_, i) =>
      Array.from({ length: n }, (_, j) => (i === n - 1 ? -d[j]! : j === i + 1 ? 1 : 0)),
    );
    this.slope = Array.from({ length: n }, (_, j) => c.reduce((s, ci, i) => s + ci * this.a[i]![j]!, 0));
    this.norm = Math.max(1, d.reduce((sum, v) => sum + Math.abs(v), 0) - 1);
    // from rest, minus the steady state [1/d₀, 0, …]
    this.start = Array.from({ length: n }, (_, i) => (i === 0 ? -1 / d[0]! : 0));
  }

  readonly start: number[];

  deviation(x: readonly number[]): number {
    return dot(this.c, x);
  }

  rate(x: readonly number[]): number {
    return dot(this.slope, x);
  }

  /** e^(At)·x: the Taylor series applied to the vector over short times, the whole matrix over long ones. */
  after(x: readonly number[], t: number): number[] {
    const pieces = Math.max(1, Math.ceil(this.norm * t));
    if (pieces > 16) return times(exponential(this.a, t), x);
    const n = x.length;
    const h = t / pieces;
    let state = x.slice();
    for (let piece = 0; piece < pieces; piece++) {
      let term = state;
      const sum = state.slice();
      for (let k = 1; k <= 18; k++) {
        // A is a companion matrix: it shifts, and its last row is −d
        const next = new Array<number>(n);
        let last = 0;
        for (let j = 0; j < n; j++) last += this.a[n - 1]![j]! * term[j]!;
        for (let j = 0; j < n - 1; j++) next[j] = (term[j + 1]! * h) / k;
        next[n - 1] = (last * h) / k;
        term = next;
        for (let j = 0; j < n; j++) sum[j]! += term[j]!;
      }
      state = sum;
    }
    return state;
  }
}

function dot(a: readonly number[], b: readonly number[]): number {
  let s = 0;
  for (let i = 0; i < a.length; i++) s += a[i]! * b[i]!;
  return s;
}

function times(m: readonly (readonly number[])[], x: readonly number[]): number[] {
  return m.map((row) => dot(row, x));
}

function product(p: number[][], q: number[][]): number[][] {
  return p.map((row) => q[0]!.map((_, j) => row.reduce((s, v, k) => s + v * q[k]![j]!, 0)));
}

/** e^(At) by scaling and squaring of the Taylor series. */
function exponential(a: number[][], t: number): number[][] {
  const norm = Math.max(...a.map((row) => row.reduce((s, v) => s + Math.abs(v), 0))) * t;
  const halvings = Math.max(0, Math.ceil(Math.log2(norm / 0.25)));
  const h = t / 2 ** halvings;
  const n = a.length;
  let term = a.map((_, i) => a.map((_, j) => (i === j ? 1 : 0) as number));
  let sum = term.map((row) => row.slice());
  for (let k = 1; k <= 13; k++) {
    term = product(term, a).map((row) => row.map((v) => (v * h) / k));
    for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) sum[i]![j]! += term[i]![j]!;
  }
  for (let k = 0; k < halvings; k++) sum = product(sum, sum);
  return sum;
}

/** Follows the deviation e = y − 1 along time and keeps what the figures need; times in scaled units. */
class Walk {
  highest: number;
  highestAt = 0;
  lowest: number;
  first10: number | null;
  first90: number | null;
  /** Finds the last time outside the band so far; asked once, at the end. */
  private outside = (): number => 0;
  private x: number[];
  private e: number;
  private rate: number;

  constructor(
    jump: number,
    private readonly response: ModalResponse,
  ) {
    this.x = response.start;
    this.e = response.deviation(this.x);
    this.rate = response.rate(this.x);
    this.highest = jump - 1;
    this.lowest = Math.min(0, jump);
    this.first10 = jump >= 0.1 ? 0 : null;
    this.first90 = jump >= 0.9 ? 0 : null;
  }

  settled(): number {
    return this.outside();
  }

  /**
   * Follows `steps` steps from time `from`. With the decay and turn of the one pair still alive, it stops once
   * the envelope A of e = A·e^(−σt)cos(ωt + φ), A² = e² + ((e' + σe)/ω)², can change no figure any more.
   */
  advance(from: number, step: number, steps: number, pair?: { decay: number; turn: number }): void {
    const n = this.x.length;
    const forward = Float64Array.from(exponential(this.response.a, step).flat());
    const { c, slope } = this.response;
    let x = Float64Array.from(this.x);
    let next = new Float64Array(n);
    for (let i = 0; i < steps; i++) {
      let e = 0;
      let rate = 0;
      for (let r = 0; r < n; r++) {
        let sum = 0;
        for (let k = 0; k < n; k++) sum += forward[r * n + k]! * x[k]!;
        next[r] = sum;
        e += c[r]! * sum;
        rate += slope[r]! * sum;
      }
      const turns = this.rate !== 0 && rate !== 0 && this.rate > 0 !== rate > 0;
      const refine = turns && this.turningMatters(e, Math.max(Math.abs(this.rate), Math.abs(rate)) * step);
      if (refine || this.matters(e)) {
        const t = from + i * step;
        const state = Array.from(x);
        if (refine) {
          const at = this.root(state, step, (z) => this.response.rate(z), this.rate);
          const turning = this.response.deviation(this.response.after(state, at));
          this.piece(state, t, 0, this.e, at, turning);
          this.piece(state, t, at, turning, step, e);
        } else this.piece(state, t, 0, this.e, step, e);
      }
      [x, next] = [next, x];
      this.e = e;
      this.rate = rate;
      if (pair && Math.hypot(e, (rate + pair.decay * e) / pair.turn) < Math.min(0.02, this.highest)) break;
    }
    this.x = Array.from(x);
  }

  /** Whether a turning point between this.e and e, at most `reach` beyond them, can change a figure. */
  private turningMatters(e: number, reach: number): boolean {
    const furthest = Math.max(Math.abs(this.e), Math.abs(e));
    return (
      (furthest <= 0.02 && furthest + reach > 0.02) ||
      Math.max(this.e, e) + reach > this.highest ||
      1 + Math.min(this.e, e) - reach < this.lowest ||
      this.first10 === null ||
      this.first90 === null
    );
  }

  /** Whether a stretch from this.e to e without a turning point can change a figure. */
  private matters(e: number): boolean {
    return (
      e > this.highest ||
      1 + e < this.lowest ||
      this.first10 === null ||
      this.first90 === null ||
      Math.abs(e) > 0.02 ||
      Math.abs(this.e) > 0.02
    );
  }

  /** One stretch without a turning point, from local time `a` to `b` after the state `x` at time `t`. */
  private piece(x: number[], t: number, a: number, ea: number, b: number, eb: number): void {
    if (eb > this.highest) {
      this.highest = eb;
      this.highestAt = t + b;
    }
    if (1 + eb < this.lowest) this.lowest = 1 + eb;
    if (this.first10 === null && 1 + eb >= 0.1) this.first10 = t + this.passage(x, a, ea, b, -0.9);
    if (this.first90 === null && 1 + eb >= 0.9) this.first90 = t + this.passage(x, a, ea, b, -0.1);
    if (Math.abs(eb) > 0.02) this.outside = () => t + b;
    else if (Math.abs(ea) > 0.02) this.outside = () => t + this.passage(x, a, ea, b, ea > 0 ? 0.02 : -0.02);
  }

  private passage(x: number[], a: number, ea: number, b: number, level: number): number {
    if (ea === level) return a;
    const state = a === 0 ? x : this.response.after(x, a);
    return a + this.root(state, b - a, (z) => this.response.deviation(z) - level, ea - level);
  }

  /** Root of f(state after t) in (0, span), f having the sign of `atStart` at 0 (Illinois false position). */
  private root(x: number[], span: number, f: (z: number[]) => number, atStart: number): number {
    let lo = 0;
    let fLo = atStart;
    let hi = span;
    let fHi = f(this.response.after(x, span));
    for (let i = 0; i < 60 && hi - lo > 1e-15 * span; i++) {
      const mid = i % 3 === 2 ? (lo + hi) / 2 : (lo * fHi - hi * fLo) / (fHi - fLo);
      const value = f(this.response.after(x, mid));
      if (value === 0) return mid;
      if (value > 0 === fLo > 0) {
        lo = mid;
        fLo = value;
      } else {
        hi = mid;
        fHi = value;
      }
    }
    return (lo + hi) / 2;
  }
}
