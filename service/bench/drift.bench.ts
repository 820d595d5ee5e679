import { createDriftChart, updateDriftChart, type DriftDecision } from '../src/drift/drift-chart.js';
import { OnlineIdentifier } from '../src/identification/online-identifier.js';
import type { PlantEstimate, WindowEstimate } from '../src/identification/plant-estimate.js';
import { randomAxis, randomSource, TestAxis } from '../test/identification/test-axis.js';
import { round, type BenchRecord } from './measure.js';

/** Tolerances that leave a 15 % change of K and a 25 % change of α outside. */
const TOLERANCES = { gainPct: 10, polePct: 15 };
const SEEDS = 40;
/** Production before a change, s. */
const BEFORE = 90;
/** How long a change may take to be decided, s. */
const LONGEST = 1_800;
/** Sound production that false decisions are drawn from, s an axis. */
const SOUND = 600;
const SOUND_AXES = 12;
const YEARS_PER_AXIS = 0.25;
/** Windows that are drawn together, so that what is alike in neighbours stays alike. */
const DRAWN = 12;

interface Step {
  window: WindowEstimate;
  pooled: PlantEstimate | null;
}

/** Streams an axis and hands over every closed window with the pooled estimate. */
function* windowsOf(
  axis: TestAxis,
  identifier: OnlineIdentifier,
  seconds: number,
): Generator<Step & { at: number }> {
  for (let at = 1; at <= seconds; at++) {
    const { position, output } = axis.run(1);
    identifier.push(position, output, 0, position.length);
    for (let window = identifier.takeWindow(); window; window = identifier.takeWindow())
      yield { at, window, pooled: identifier.estimate() };
  }
}

function identifierOf({ setup }: ReturnType<typeof randomAxis>): OnlineIdentifier {
  const { designGain, designPole, sampleTime, resolution } = setup;
  return new OnlineIdentifier({ gain: designGain, pole: designPole, sampleTime, resolution });
}

const drifted = (decisions: readonly DriftDecision[]): boolean =>
  decisions.some(({ state }) => state === 'drifted');

/** Seconds of production from a change to its decision; null when it is not decided in time, −1 when before it. */
function decided(seed: number, change: (axis: TestAxis) => void, quantity: 'gain' | 'pole'): number | null {
  const random = randomAxis(seed, { dwell: 0.4 });
  const axis = new TestAxis(random.setup);
  const identifier = identifierOf(random);
  const chart = createDriftChart(random, TOLERANCES);
  for (const { window, pooled } of windowsOf(axis, identifier, BEFORE))
    if (drifted(updateDriftChart(chart, window, pooled))) return -1;
  change(axis);
  for (const { at, window, pooled } of windowsOf(axis, identifier, LONGEST))
    if (updateDriftChart(chart, window, pooled).some((d) => d.quantity === quantity && d.state === 'drifted'))
      return at;
  return null;
}

/**
 * False decisions of sound axes: charts of a quarter of a year each, fed with stretches of windows drawn from ten
 * simulated minutes of the same axis (block bootstrap, Künsch 1989, from memory).
 */
function falseDecisions(): { years: number; decisions: number; simulatedHours: number } {
  let decisions = 0;
  let years = 0;
  for (let seed = 101; seed < 101 + SOUND_AXES; seed++) {
    const random = randomAxis(seed, { dwell: 0.4 });
    const steps = [...windowsOf(new TestAxis(random.setup), identifierOf(random), SOUND)];
    const windowSeconds = SOUND / steps.length;
    const chart = createDriftChart(random, TOLERANCES);
    const draw = randomSource(seed);
    let was = false;
    for (let passed = 0; passed < YEARS_PER_AXIS * 365 * 86_400; passed += DRAWN * windowSeconds) {
      const from = Math.floor(draw() * (steps.length - DRAWN));
      for (let i = from; i < from + DRAWN; i++) {
        const now = drifted(updateDriftChart(chart, steps[i]!.window, steps[i]!.pooled));
        if (now && !was) decisions++;
        was = now;
      }
    }
    years += YEARS_PER_AXIS;
  }
  return { years, decisions, simulatedHours: (SOUND_AXES * SOUND) / 3600 };
}

/** False decisions a year of production, and how surely and how soon a real change is decided. */
export default function driftBench(): Promise<BenchRecord[]> {
  const sound = falseDecisions();
  const changes = [
    {
      name: 'drift-gain-down-15pct',
      quantity: 'gain' as const,
      change: (axis: TestAxis) => {
        axis.physics.forceForward *= 0.85;
        axis.physics.forceReverse *= 0.85;
      },
    },
    {
      name: 'drift-pole-down-25pct',
      quantity: 'pole' as const,
      change: (axis: TestAxis) => void (axis.physics.mass /= 0.75),
    },
  ];
  return Promise.resolve([
    {
      name: 'drift-false-decisions',
      value: round(sound.decisions / sound.years),
      unit: 'a year of production',
      floor: null,
      ratio: null,
      note: `at most 1 wanted; ${sound.years} axis-years drawn from ${sound.simulatedHours.toFixed(1)} h simulated`,
    },
    ...changes.map(({ name, quantity, change }): BenchRecord => {
      const times = Array.from({ length: SEEDS }, (_, i) => decided(i + 1, change, quantity));
      const inTime = times.filter((at): at is number => at !== null && at >= 0).sort((a, b) => a - b);
      return {
        name,
        value: round((100 * inTime.length) / SEEDS),
        unit: '% decided within 30 min',
        floor: 95,
        ratio: round((100 * inTime.length) / SEEDS / 95),
        note: `${SEEDS} seeds; median after ${inTime[inTime.length >> 1]} s of production, slowest ${inTime.at(-1)} s; floor: what is wanted`,
      };
    }),
  ]);
}
