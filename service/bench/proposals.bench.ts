import { placeGains, type Gains } from '../src/control/pole-placement.js';
import { sampledMaxSensitivity } from '../src/control/sampled-margins.js';
import type { Axis } from '../src/fleet/axis.entity.js';
import { causeOf } from '../src/fleet/cause-of.js';
import { expectedOf, recommend } from '../src/proposals/evidence.js';
import { median } from '../src/proposals/rank-statistics.js';
import { AxisPipeline } from '../src/telemetry/axis-pipeline.js';
import { randomSource } from '../test/identification/test-axis.js';
import { ProductionAxis } from '../test/support/production-axis.js';
import { round, type BenchRecord } from './measure.js';

const SEEDS = 100;
const STEP_US = 2_000;
const RESOLUTION = 0.005;
/** Ms that no proposal may exceed, and the share by which the peak error may miss that of commissioning. */
const MS_LIMIT = 2;
const BACK_WITHIN = 0.1;
const TOLERANCES = { followingError: 2, gainPct: 15, polePct: 20, saturatedPct: 5 };

type Fault = { kind: 'load' | 'drag' | 'strength'; factor: number };

interface Outcome {
  decided: boolean;
  advice: string | null;
  proposed: boolean;
  /** Largest relative difference of a gain from the closed formula on the estimate. */
  offFormula: number;
  /** Peak following error on trial over that of commissioning, − 1. */
  peakOff: number;
  /** Ms of the proposed gains on the machine's true plant. */
  trueMs: number;
}

/** Peak following error of the long forward moves, mm. */
const peakOf = (pipeline: AxisPipeline, since: number): number =>
  median(
    pipeline.closedMoves
      .filter(({ t, distance }) => t > since && distance > 200)
      .map(({ peakError }) => peakError),
  );

/** One machine, from commissioning through a fault and a proposal to its trial. */
function life(seed: number, fault: Fault): Outcome {
  const random = randomSource(seed);
  const between = (low: number, high: number): number => low + (high - low) * random();
  const plant = { gain: between(10, 20), pole: between(10, 30), coulomb: between(0.5, 3) };
  const pattern = { kind: 'triple' as const, lambda: between(18, 32) };
  const axis = {
    sampleTime: STEP_US / 1e6,
    resolution: RESOLUTION,
    tolerances: TOLERANCES,
    move: { distance: 250, duration: 0.9 },
    pattern,
  } as Axis;
  const commissioned = placeGains(plant, 'PI-D', pattern, true);
  const machine = new ProductionAxis(plant, commissioned, STEP_US, RESOLUTION);
  const facts = {
    id: 1,
    siteId: 1,
    tag: 'bench',
    sampleTime: axis.sampleTime,
    resolution: RESOLUTION,
    loopFrequency: pattern.lambda,
    baseline: { ...plant, bias: null, gainForward: null, gainReverse: null },
    tolerances: TOLERANCES,
    revision: 1,
    inMaintenance: false,
  };
  const pipeline = new AxisPipeline(facts);
  let clock = 1_000;
  const run = (seconds: number): void => {
    for (let s = 0; s < seconds; s++) pipeline.push(machine.run(1e6 * clock++, 1));
  };
  run(60);
  const before = peakOf(pipeline, 1_000);
  machine[fault.kind] = fault.factor;
  run(180);
  const { decisions, estimate } = pipeline;
  const decided = decisions?.gain.state === 'drifted' || decisions?.pole.state === 'drifted';
  const nothing = { offFormula: 0, peakOff: Infinity, trueMs: Infinity };
  const advice = causeOf(pipeline)?.advice ?? null;
  if (!decided || !estimate) return { decided: false, advice, proposed: false, ...nothing };
  const { gains, lambda } = recommend(axis, estimate, { structure: 'PI-D', pattern, feedForward: true });
  if (!gains || lambda === null) return { decided, advice, proposed: false, ...nothing };
  const [K, a] = [estimate.gain.value, estimate.pole.value];
  const formula: Gains = {
    kp: (3 * lambda ** 2) / (K * a),
    ki: lambda ** 3 / (K * a),
    kd: (3 * lambda - a) / (K * a),
    kv: 1 / K + (3 * lambda - a) / (K * a),
    ka: 1 / (K * a),
  };
  machine.take(gains);
  run(1);
  pipeline.restartDrift({ ...facts, revision: 2 });
  const since = clock + 5;
  run(45);
  const expected = expectedOf(
    axis,
    estimate,
    { gains: commissioned, structure: 'PI-D' },
    { gains, structure: 'PI-D' },
  );
  const truth = {
    gain: (plant.gain * machine.strength) / machine.drag,
    pole: (plant.pole * machine.drag) / machine.load,
  };
  return {
    decided,
    advice,
    proposed: true,
    offFormula: Math.max(
      ...(['kp', 'ki', 'kd', 'kv', 'ka'] as const).map((name) => Math.abs(gains[name] / formula[name] - 1)),
    ),
    peakOff: peakOf(pipeline, since) / before - 1,
    trueMs: Math.max(
      sampledMaxSensitivity(truth, gains, axis.sampleTime, 0).value,
      expected.worst?.maxSensitivity ?? Infinity,
    ),
  };
}

/** Proposals over seeds: from a fault through drift and gains to the trial, beside what each figure must reach. */
export default function proposals(): BenchRecord[] {
  const lives = (kind: Fault['kind'], low: number, high: number): Outcome[] =>
    Array.from({ length: SEEDS }, (_, i) =>
      life(i + 1, { kind, factor: low + ((high - low) * i) / (SEEDS - 1) }),
    );
  const load = lives('load', 1.4, 2);
  const made = load.filter(({ proposed }) => proposed);
  const wear = [...lives('drag', 1.4, 2), ...lives('strength', 0.75, 0.55)].filter(({ decided }) => decided);
  const share = (all: Outcome[], good: (outcome: Outcome) => boolean): number =>
    round((100 * all.filter(good).length) / all.length);
  return [
    {
      name: 'load-changes-decided',
      value: share(load, ({ decided }) => decided),
      unit: '%',
      floor: 95,
      ratio: null,
    },
    {
      name: 'load-changes-with-gains',
      value: share(load, ({ proposed }) => proposed),
      unit: '%',
      floor: null,
      ratio: null,
    },
    {
      name: 'gains-off-the-closed-formula',
      value: Math.max(...made.map(({ offFormula }) => offFormula)),
      unit: 'relative',
      floor: 1e-9,
      ratio: null,
    },
    {
      name: 'peak-error-back-within-10-pct',
      value: share(made, ({ peakOff }) => peakOff <= BACK_WITHIN),
      unit: '% of load changes',
      floor: 95,
      ratio: null,
      note: `worst ${round(100 * Math.max(...made.map(({ peakOff }) => peakOff)))} % above commissioning`,
    },
    {
      name: 'largest-ms',
      value: round(Math.max(...made.map(({ trueMs }) => trueMs))),
      unit: '',
      floor: MS_LIMIT,
      ratio: null,
      note: 'on the true plant and on every corner of the 95 % region',
    },
    {
      name: 'wear-inspect-first',
      value: share(wear, ({ advice }) => advice === 'inspect first'),
      unit: `% of ${wear.length} decided`,
      floor: 100,
      ratio: null,
    },
  ];
}
