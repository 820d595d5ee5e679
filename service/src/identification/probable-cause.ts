import type { Interval, PlantEstimate } from './plant-estimate.js';

/**
 * What probably changed in a machine, from how its plant changed.
 *
 * K = g/B, α = B/M, f = F/g, b = o/g: one physical cause moves (ln K, ln α, ln f) along one direction,
 *
 *   load M up        ( 0, −1,  0)      viscous drag B up    (−1, +1,  0)
 *   force g down     (−1,  0, +1)      dry friction F up    ( 0,  0, +1)
 *
 * while an offset moves b alone and a fault of one direction of travel moves K⁺/K⁻, and what friction and offset
 * take of that direction's force. Each cause is fitted by generalised least squares in the metric of the estimate's
 * covariance; the misfit left over, weighed against the other causes', gives the confidence. (Directions: common
 * practice, no source.)
 */
export type CauseName =
  'load' | 'viscous drag' | 'actuating force' | 'dry friction' | 'offset' | 'one direction' | 'unclear';

export interface CauseEvidence {
  readonly baseline: {
    readonly gain: number;
    readonly pole: number;
    readonly gainForward?: number;
    readonly gainReverse?: number;
  };
  readonly estimate: PlantEstimate;
  /** f at commissioning, %; unknown when not given. */
  readonly coulombBaseline?: number;
  /** b at commissioning, %; unknown when not given. */
  readonly biasBaseline?: number;
}

export interface Cause {
  readonly name: CauseName;
  /** 0 … 1, over the causes listed here and "something else". */
  readonly confidence: number;
  readonly alternatives: readonly { readonly name: CauseName; readonly confidence: number }[];
  readonly direction: 'up' | 'down';
  /** How much the physical quantity changed, % of its baseline (offset: % of output; one direction: % of K). */
  readonly amountPct: number;
  readonly advice: 'retune' | 'inspect first';
  readonly sentence: string;
}

/**
 * Spread that a single clean cause leaves beside the estimate's own error: baselines are themselves
 * estimates, and no fault is pure. ln K, ln α, ln f, b in %, ln(K⁺/K⁻) (common practice, no source).
 */
const MODEL_SPREAD = { lnGain: 0.02, lnPole: 0.03, lnCoulomb: 0.1, coulomb: 0.1, bias: 0.1, lnRatio: 0.02 };
/** Squared misfit at which "something else" is as good an answer. */
const STRANGER_MISFIT = 12;
const LEAST_CONFIDENCE = 0.6;
/** Squared distance from the baseline below which nothing has changed that could be explained. */
const LEAST_CHANGE = 9;

/** By how much a cause moves ln K, ln α, ln f, b and ln(K⁺/K⁻); nothing where not given. */
type Signature = Partial<Record<'gain' | 'pole' | 'coulomb' | 'bias' | 'ratio', number>>;

interface Candidate {
  readonly name: CauseName;
  readonly misfit: number;
  readonly amount: number;
}

/** Names the cause that fits best, with how well it fits and what else fits nearly as well. */
export function probableCause(evidence: CauseEvidence): Cause {
  const { baseline, estimate, coulombBaseline, biasBaseline } = evidence;
  const { lnCovariance } = estimate;
  const x: number[] = [
    Math.log(estimate.gain.value / baseline.gain),
    Math.log(estimate.pole.value / baseline.pole),
  ];
  const covariance: number[][] = [
    [lnCovariance.gain + MODEL_SPREAD.lnGain ** 2, lnCovariance.cross],
    [lnCovariance.cross, lnCovariance.pole + MODEL_SPREAD.lnPole ** 2],
  ];
  const axisOf: Record<string, number> = { gain: 0, pole: 1 };
  const add = (name: string, value: number, variance: number): void => {
    for (const row of covariance) row.push(0);
    covariance.push([...x.map(() => 0), variance]);
    axisOf[name] = x.length;
    x.push(value);
  };
  if (coulombBaseline !== undefined) {
    const floor = Math.max(coulombBaseline, 0.2);
    const now = Math.max(estimate.coulomb.value, 0.05);
    const deviation = deviationOf(estimate.coulomb);
    add(
      'coulomb',
      Math.log(Math.max(now, floor / 4) / floor),
      (deviation / now) ** 2 + MODEL_SPREAD.lnCoulomb ** 2 + (MODEL_SPREAD.coulomb / floor) ** 2,
    );
  }
  if (biasBaseline !== undefined) {
    add('bias', estimate.bias.value - biasBaseline, deviationOf(estimate.bias) ** 2 + MODEL_SPREAD.bias ** 2);
  }
  const forward = estimate.gainForward ?? estimate.gain;
  const reverse = estimate.gainReverse ?? estimate.gain;
  const ratioBaseline = Math.log(
    (baseline.gainForward ?? baseline.gain) / (baseline.gainReverse ?? baseline.gain),
  );
  const lnDeviation = (i: Interval): number => Math.log(i.high / i.low) / 3.92;
  add(
    'ratio',
    Math.log(forward.value / reverse.value) - ratioBaseline,
    lnDeviation(forward) ** 2 + lnDeviation(reverse) ** 2 + MODEL_SPREAD.lnRatio ** 2,
  );

  const metric = invert(covariance);
  const distance = form(metric, x, x);
  const baselineF = coulombBaseline ?? 0;
  const baselineB = biasBaseline ?? 0;
  const forwardGain = baseline.gainForward ?? baseline.gain;
  const reverseGain = baseline.gainReverse ?? baseline.gain;
  const oneDirection = (lnForward: number, lnReverse: number): Signature => {
    // f ± b = c±/β±: what resists one way weighs more where that way's force has fallen.
    const resistForward = (baselineF + baselineB) * Math.exp(-lnForward);
    const resistReverse = (baselineF - baselineB) * Math.exp(-lnReverse);
    const mean = (forwardGain * Math.exp(lnForward) + reverseGain * Math.exp(lnReverse)) / 2;
    return {
      gain: Math.log((2 * mean) / (forwardGain + reverseGain)),
      coulomb:
        baselineF > 0 ? Math.log(Math.max((resistForward + resistReverse) / (2 * baselineF), 0.05)) : 0,
      bias: (resistForward - resistReverse) / 2 - baselineB,
      ratio: lnForward - lnReverse,
    };
  };
  const fitted = (name: CauseName, signature: (amount: number) => Signature): Candidate => {
    const vector = (amount: number): number[] => {
      const expected = x.map(() => 0);
      for (const [axis, size] of Object.entries(signature(amount))) {
        const i = axisOf[axis];
        if (i !== undefined) expected[i] = size;
      }
      return expected;
    };
    return { name, ...fitAmount(x, metric, vector) };
  };
  const candidates: Candidate[] = [
    fitted('load', (a) => ({ pole: -a })),
    fitted('viscous drag', (a) => ({ gain: -a, pole: a })),
    // f = F/g and b = o/g rise when the force per output falls.
    fitted('actuating force', (a) => ({ gain: a, coulomb: -a, bias: baselineB * Math.expm1(-a) })),
  ];
  if (axisOf.coulomb !== undefined) candidates.push(fitted('dry friction', (a) => ({ coulomb: a })));
  if (axisOf.bias !== undefined) candidates.push(fitted('offset', (a) => ({ bias: a })));
  const forwardChange = fitted('one direction', (a) => oneDirection(a, 0));
  const reverseChange = fitted('one direction', (a) => oneDirection(0, a));
  candidates.push(forwardChange.misfit <= reverseChange.misfit ? forwardChange : reverseChange);

  const degrees = x.length - 1;
  const best = Math.min(STRANGER_MISFIT + degrees, ...candidates.map((c) => c.misfit));
  const weight = (misfit: number): number => Math.exp(-(misfit - best) / 2);
  const total = candidates.reduce((s, c) => s + weight(c.misfit), weight(STRANGER_MISFIT + degrees));
  const ranked = candidates
    .map((c) => ({ ...c, confidence: weight(c.misfit) / total }))
    .sort((a, b) => b.confidence - a.confidence);
  const first = ranked[0]!;
  const others = ranked.slice(1).filter((c) => c.confidence >= 0.05);
  if (
    distance < LEAST_CHANGE ||
    first.confidence < LEAST_CONFIDENCE ||
    estimate.verdict === 'unidentifiable'
  ) {
    return {
      name: 'unclear',
      confidence: distance < LEAST_CHANGE ? 0 : 1 - first.confidence,
      alternatives: ranked
        .filter((c) => c.confidence >= 0.05)
        .map(({ name, confidence }) => ({ name, confidence })),
      direction: x[0]! >= 0 ? 'up' : 'down',
      amountPct: 100 * (Math.exp(x[0]!) - 1),
      advice: 'inspect first',
      sentence: unclearSentence(distance, x[0]!, x[1]!, ranked),
    };
  }
  const up = first.amount > 0;
  const amountPct = first.name === 'offset' ? first.amount : 100 * (Math.exp(first.amount) - 1);
  return {
    name: first.name,
    confidence: first.confidence,
    alternatives: others.map(({ name, confidence }) => ({ name, confidence })),
    direction: up ? 'up' : 'down',
    amountPct,
    advice: first.name === 'load' ? 'retune' : 'inspect first',
    sentence: causeSentence(first.name, amountPct, up),
  };
}

function causeSentence(name: CauseName, amountPct: number, up: boolean): string {
  const size = Math.abs(amountPct).toFixed(0);
  switch (name) {
    case 'load':
      return `The moved mass looks ${size} % ${up ? 'larger' : 'smaller'}: the pole moved and the gain did not. A retune fits.`;
    case 'viscous drag':
      return `Viscous drag looks ${size} % ${up ? 'higher' : 'lower'}: gain and pole moved against each other. Look at seals, lubrication and temperature first; a retune is a stop-gap.`;
    case 'actuating force':
      return `The actuating force per output looks ${size} % ${up ? 'higher' : 'lower'}: the gain moved and the pole did not. Look at supply pressure, bus voltage and amplifier first; a retune is a stop-gap.`;
    case 'dry friction':
      return `Dry friction looks ${size} % ${up ? 'higher' : 'lower'} while gain and pole stayed. Look at guides, bearings and seals first; a retune is a stop-gap.`;
    case 'offset':
      return `The output needed at rest moved by ${Math.abs(amountPct).toFixed(1)} % of full output. Look at the valve or amplifier null and at the balance first.`;
    case 'one direction':
      return `One direction of travel changed against the other by ${size} %. Look at the valve, the cylinder seals and the amplifier of that direction first.`;
    case 'unclear':
      return 'The evidence does not point to one cause. Inspect first.';
  }
}

function unclearSentence(
  distance: number,
  lnGain: number,
  lnPole: number,
  ranked: readonly { name: CauseName }[],
): string {
  if (distance < LEAST_CHANGE) return 'Nothing has changed by more than its own uncertainty.';
  const pct = (ln: number): string =>
    `${ln >= 0 ? '+' : '−'}${Math.abs(100 * (Math.exp(ln) - 1)).toFixed(0)} %`;
  return `Gain ${pct(lnGain)} and pole ${pct(lnPole)} do not point to one cause; ${ranked[0]!.name} and ${ranked[1]!.name} come nearest. Inspect first.`;
}

/** Amount of a cause that explains x best in the metric, by Gauss–Newton from nothing changed, and what it leaves. */
function fitAmount(
  x: readonly number[],
  metric: readonly (readonly number[])[],
  expected: (amount: number) => number[],
): { amount: number; misfit: number } {
  const left = (amount: number): number[] => expected(amount).map((value, i) => x[i]! - value);
  const STEP = 1e-4;
  let amount = 0;
  let misfit = form(metric, x, x);
  for (let iteration = 0; iteration < 20; iteration++) {
    const above = expected(amount + STEP);
    const slope = expected(amount - STEP).map((value, i) => (above[i]! - value) / (2 * STEP));
    const length = form(metric, slope, slope);
    if (!(length > 0)) break;
    let step = form(metric, slope, left(amount)) / length;
    const misfitAt = (to: number): number => form(metric, left(to), left(to));
    while (Math.abs(step) > 1e-6 && !(misfitAt(amount + step) < misfit)) step /= 2;
    if (Math.abs(step) <= 1e-6) break;
    amount += step;
    misfit = misfitAt(amount);
  }
  return { amount, misfit };
}

function deviationOf(i: Interval): number {
  return (i.high - i.low) / 3.92;
}

function form(metric: readonly (readonly number[])[], a: readonly number[], b: readonly number[]): number {
  let s = 0;
  for (let i = 0; i < a.length; i++) for (let j = 0; j < b.length; j++) s += a[i]! * metric[i]![j]! * b[j]!;
  return s;
}

/** Inverse of a small positive definite matrix by Gauss-Jordan elimination. */
function invert(m: readonly (readonly number[])[]): number[][] {
  const n = m.length;
  const a = m.map((row, i) => [...row, ...row.map((_, j) => (i === j ? 1 : 0))]);
  for (let c = 0; c < n; c++) {
    const pivot = a[c]![c]!;
    a[c] = a[c]!.map((v) => v / pivot);
    for (let r = 0; r < n; r++) {
      if (r === c) continue;
      const f = a[r]![c]!;
      a[r] = a[r]!.map((v, j) => v - f * a[c]![j]!);
    }
  }
  return a.map((row) => row.slice(n));
}
