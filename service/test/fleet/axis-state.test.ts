import { describe, expect, test } from 'vitest';
import type { DriftDecision, DriftState } from '../../src/drift/drift-chart.js';
import { judgeAxis, SILENT_AFTER, type AxisEvidence } from '../../src/fleet/axis-state.js';
import type { PlantEstimate } from '../../src/identification/plant-estimate.js';
import { addUp, indicatorsOf } from '../../src/indicators/indicators.js';

const about = (value: number): { value: number; low: number; high: number } => ({
  value,
  low: 0.98 * value,
  high: 1.02 * value,
});

const estimate: PlantEstimate = {
  gain: about(12),
  pole: about(12.5),
  coulomb: about(4),
  bias: about(0.1),
  deadTime: 0,
  lnCovariance: { gain: 1e-4, cross: 0, pole: 1e-4 },
  fitPct: 96,
  movingSeconds: 60,
  verdict: 'usable',
  remarks: [],
};

const decision = (quantity: 'gain' | 'pole', state: DriftState, ratio = 1): DriftDecision => ({
  quantity,
  state,
  direction: state === 'signal' || state === 'drifted' ? (ratio < 1 ? -1 : 1) : 0,
  since: 1,
  window: 20,
  ratio,
  pooledRatio: { value: ratio, low: 0.98 * ratio, high: 1.02 * ratio },
  ewma: ratio,
  lowerLimit: 0.95,
  upperLimit: 1.05,
  cusumShare: 0,
});

/** Everything is well; a case changes what it is about. */
const well: AxisEvidence = {
  maintenance: null,
  silence: 0.4,
  lastSampleAt: new Date('2026-03-02T10:00:00Z'),
  indicators: {
    ...indicatorsOf(addUp([])),
    peakFollowingError: 0.83,
    saturatedPct: 7.2,
    outputActivity: 4.1,
    dominantHz: 47,
  },
  estimate: { ...estimate, pole: about(20.5) },
  decisions: { gain: decision('gain', 'in-control'), pole: decision('pole', 'in-control') },
  cause: null,
  baseline: { gain: 12, pole: 20, coulomb: 2, bias: 0, gainForward: null, gainReverse: null },
  tolerances: { followingError: 0.5, gainPct: 15, polePct: 20, saturatedPct: 5 },
  standing: [],
  timeOf: (at) => at.toISOString().slice(11, 19),
};
const drifted: Partial<AxisEvidence> = {
  estimate,
  decisions: { gain: decision('gain', 'in-control'), pole: decision('pole', 'drifted', 0.625) },
};
const maintained: Partial<AxisEvidence> = {
  maintenance: { until: new Date('2026-03-02T11:30:00Z'), reason: 'Guide change' },
};

describe('an axis is', () => {
  test.each<[string, Partial<AxisEvidence>, string]>([
    ['in-tune', {}, 'K and pole within 3 % of baseline.'],
    ['in-tune', { estimate: null }, 'Listening. K and pole are not known from production moves yet.'],
    ['in-tune', { baseline: null }, 'No baseline yet. An engineer confirms the first usable estimate.'],
    [
      'drifting',
      { standing: ['output-saturation'] },
      'Output at its limit 7.2 % of moving time. Allowed are 5 %.',
    ],
    [
      'drifting',
      { standing: ['dry-friction'], estimate },
      'Dry friction is up. 2.0 → 4.0 % of output; inspect before any retune.',
    ],
    [
      'drifting',
      { standing: ['output-activity'] },
      'Output hums at 4.1 % RMS near 47 Hz. Gains may be too high for the resolution.',
    ],
    [
      'drifting',
      { decisions: { gain: decision('gain', 'in-control'), pole: decision('pole', 'signal', 0.88) } },
      'Pole α is moving down. 12 % off baseline, still within tolerance.',
    ],
    [
      'drifting',
      { decisions: { gain: decision('gain', 'signal', 1.07), pole: decision('pole', 'learning') } },
      'Gain K is moving up. 7 % off baseline, still within tolerance.',
    ],
    ['out-of-tune', drifted, 'K or the pole is beyond tolerance. Pole 20.0 → 12.5 rad/s.'],
    [
      'out-of-tune',
      { standing: ['following-error'] },
      'Following error beyond its 0.5 mm. Peak 0.83 mm in the last minute.',
    ],
    [
      'no-signal',
      { silence: null, lastSampleAt: null },
      'No samples yet. Its gateway has not reported this axis.',
    ],
    ['no-signal', { silence: SILENT_AFTER }, 'No samples since 10:00:00.'],
    ['in-maintenance', maintained, 'In maintenance until 11:30:00. Guide change.'],
  ])('%s', (state, change, reason) => {
    expect(judgeAxis({ ...well, ...change })).toEqual({ state, reason });
  });
});

test('the first that holds counts: maintenance, silence, drift, following error, another alert, the chart', () => {
  const order: [string, Partial<AxisEvidence>][] = [
    ['in-maintenance', maintained],
    ['no-signal', { silence: 60 }],
    ['out-of-tune', drifted],
    ['drifting', { standing: ['output-saturation'] }],
  ];
  for (let k = 0; k < order.length; k++) {
    const together = order.slice(k).reduce((all, [, change]) => ({ ...all, ...change }), well);
    expect(judgeAxis(together).state).toBe(order[k]![0]);
  }
});
