import type { Design, DesignQuestion } from './design.js';
import {
  patternAt,
  patternFrequency,
  placeGains,
  type PolePattern,
  type Structure,
} from './pole-placement.js';
import { abs, type Complex } from './polynomial.js';
import { outputRipple } from './sampled-loop.js';
import type { Plant } from './plant.js';

/** Output ripple from which on an axis is said to hum, % RMS (common practice, no source). */
const HUM = 1;
/** λ is looked at up to this many times as fast when asking where the hum begins. */
const FASTEST = 30;

/** What a person should know of one set of gains, in plain sentences. */
export function designRemarks(question: DesignQuestion, result: Design): string[] {
  const { plant, structure, pattern, gains } = question;
  return [
    ...(gains ? [] : kdRemarks(plant, pattern!, result.gains.kd)),
    ...structureRemarks(structure, result),
    ...humRemarks(question, result),
  ];
}

/**
 * Kd = (d₂ − α)/(Kα) turns negative where the poles add up to less than α; on a pattern scaled to λ that is at
 * λ = λ₀·α/d₂, α/3 for a triple pole.
 */
function kdRemarks(plant: Plant, pattern: PolePattern, kd: number): string[] {
  const lambda = patternFrequency(pattern);
  const sum = kd * plant.gain * plant.pole + plant.pole;
  const turns = (lambda * plant.pole) / sum;
  const where = `λ = ${pattern.kind === 'triple' ? 'α/3 = ' : ''}${figure(turns)} rad/s`;
  return kd < 0
    ? [
        `Kd is negative: the poles add up to ${figure(sum)} rad/s, less than α = ${figure(plant.pole)} rad/s. It turns positive above ${where}. With D on the error the step first goes the wrong way.`,
      ]
    : [`Kd turns negative below ${where}, where PI alone places the poles.`];
}

/** What the structure and the feed-forward do to the zeros and so to a step; the poles are the same for all three. */
function structureRemarks(structure: Structure, { gains, closedLoop, step, errors }: Design): string[] {
  const real = closedLoop.poles.every(({ re, im }) => Math.abs(im) <= 1e-9 * Math.abs(re));
  const overshoot =
    step.overshootPct === null
      ? 'a step does not settle'
      : step.overshootPct < 0.005
        ? 'a step does not overshoot'
        : `a step overshoots by ${step.overshootPct.toFixed(1)} % ${real ? 'although all poles are real' : 'with these poles'}`;
  const lag =
    errors.ramp === null
      ? 'it falls further and further behind a ramp'
      : Math.abs(errors.ramp) < 1e-9
        ? 'it follows a ramp without lag'
        : `it lags ${figure(errors.ramp * 100)} mm behind a ramp of 100 mm/s`;
  const who = gains.kv === 0 && gains.ka === 0 ? structure : `${structure} with feed-forward`;
  return [`${who} adds ${zerosInWords(closedLoop)}: ${overshoot}; ${lag}.`];
}

/** "2 zeros at −25.3 ± 5.95j rad/s"; zeros that cancel every pole are said to. */
function zerosInWords({ poles, zeros }: Design['closedLoop']): string {
  if (zeros.length === 0) return 'no zeros';
  const near = (a: Complex, b: Complex): boolean =>
    abs({ re: a.re - b.re, im: a.im - b.im }) <= 1e-3 * abs(a);
  if (zeros.length === poles.length && zeros.every((zero) => poles.some((pole) => near(pole, zero))))
    return `${zeros.length} zeros that cancel the poles`;
  const places = zeros
    .filter(({ im }) => im >= 0)
    .map(({ re, im }) => (im === 0 ? figure(re) : `${figure(re)} ± ${figure(im)}j`));
  return `${zeros.length === 1 ? 'one zero' : `${zeros.length} zeros`} at ${places.join(' and ')} rad/s`;
}

/** λ from which on the ripple that the resolution causes exceeds HUM, by bisection on the pattern scaled to λ. */
function humRemarks(
  { plant, structure, pattern, gains, feedForward, controller }: DesignQuestion,
  { sampled }: Design,
): string[] {
  const { resolution = 0, sampleTime, outputDelaySamples = 0 } = controller;
  if (resolution === 0) return [];
  const now = sampled.outputRippleRms;
  if (now === null) return ['The sampled loop is not stable: it would oscillate, not hum.'];
  const says = `With a resolution of ${figure(resolution * 1000)} µm the output ripples by ${figure(now)} % RMS while it holds`;
  if (gains || !pattern) return [`${says}.`];
  const lambda = patternFrequency(pattern);
  const hums = (at: number): boolean => {
    const placed = placeGains(plant, structure, patternAt(pattern, at), feedForward);
    const ripple = outputRipple(plant, placed, sampleTime, outputDelaySamples, resolution);
    return ripple === null || ripple > HUM;
  };
  let [low, high] = now > HUM ? [lambda / FASTEST, lambda] : [lambda, lambda * FASTEST];
  if (!hums(high)) return [`${says}.`];
  if (hums(low)) return [`${says}: it hums, and a lower λ hardly helps.`];
  for (let halving = 0; halving < 14; halving++) {
    const middle = Math.sqrt(low * high);
    if (hums(middle)) high = middle;
    else low = middle;
  }
  return [
    `${says}; ${now > HUM ? `it hums, and stops below λ = ${figure(low)} rad/s` : `it starts to hum (${HUM} %) from λ = ${figure(high)} rad/s`}.`,
  ];
}

/** Three significant digits with a proper minus. */
const figure = (value: number): string => {
  const digits = Math.abs(value) >= 1000 ? value.toFixed(0) : String(Number(value.toPrecision(3)));
  return digits.replace('-', '−');
};
