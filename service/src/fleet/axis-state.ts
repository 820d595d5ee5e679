import type { DriftDecisions } from '../telemetry/axis-pipeline.js';
import type { Cause } from '../identification/probable-cause.js';
import type { PlantEstimate } from '../identification/plant-estimate.js';
import type { Indicators } from '../indicators/indicators.js';
import type { AxisState, Baseline, Tolerances } from './axis.entity.js';

/** Everything that an axis's state is judged from. */
export interface AxisEvidence {
  maintenance: { until: Date | null; reason: string | null } | null;
  /** s since the last sample arrived; null before the first */
  silence: number | null;
  lastSampleAt: Date | null;
  indicators: Indicators | null;
  estimate: PlantEstimate | null;
  decisions: DriftDecisions | null;
  cause: Cause | null;
  baseline: Baseline | null;
  tolerances: Tolerances;
  /** Rules whose alert stands, acknowledged or not, shelved ones left out. */
  standing: readonly string[];
  /** For times in sentences. */
  timeOf: (at: Date) => string;
}

export interface Judgement {
  state: AxisState;
  /** One or two sentences; the first is what a tile shows in bold. */
  reason: string;
}

/** Samples this late, s, mean no signal. */
export const SILENT_AFTER = 10;

const percent = (ratio: number): string => `${Math.abs((ratio - 1) * 100).toFixed(0)} %`;

/**
 * The state of an axis and why, by the first that holds: in maintenance, no signal, out of tune (drift decided, or a
 * following-error alert stands), drifting (the chart signals, or another alert stands), in tune.
 */
export function judgeAxis(evidence: AxisEvidence): Judgement {
  const {
    maintenance,
    silence,
    lastSampleAt,
    decisions,
    estimate,
    baseline,
    cause,
    indicators,
    standing,
    tolerances,
  } = evidence;
  if (maintenance)
    return {
      state: 'in-maintenance',
      reason: `In maintenance${maintenance.until ? ` until ${evidence.timeOf(maintenance.until)}` : ''}.${maintenance.reason ? ` ${sentence(maintenance.reason)}` : ''}`,
    };
  if (silence === null)
    return { state: 'no-signal', reason: 'No samples yet. Its gateway has not reported this axis.' };
  if (silence >= SILENT_AFTER)
    return { state: 'no-signal', reason: `No samples since ${evidence.timeOf(lastSampleAt!)}.` };

  const drifted = decisions && (decisions.gain.state === 'drifted' || decisions.pole.state === 'drifted');
  if (drifted && estimate && baseline)
    return {
      state: 'out-of-tune',
      reason: `${cause ? cause.sentence : 'K or the pole is beyond tolerance.'} ${figures(estimate, baseline, decisions)}`,
    };
  if (standing.includes('following-error') && indicators?.peakFollowingError != null)
    return {
      state: 'out-of-tune',
      reason: `Following error beyond its ${tolerances.followingError} mm. Peak ${indicators.peakFollowingError.toFixed(2)} mm in the last minute.`,
    };
  if (standing.includes('output-saturation') && indicators?.saturatedPct != null)
    return {
      state: 'drifting',
      reason: `Output at its limit ${indicators.saturatedPct.toFixed(1)} % of moving time. Allowed are ${tolerances.saturatedPct} %.`,
    };
  if (standing.includes('dry-friction') && estimate && baseline)
    return {
      state: 'drifting',
      reason: `Dry friction is up. ${baseline.coulomb === null ? '' : `${baseline.coulomb.toFixed(1)} → `}${estimate.coulomb.value.toFixed(1)} % of output; inspect before any retune.`,
    };
  if (standing.includes('output-activity') && indicators)
    return {
      state: 'drifting',
      reason: `Output hums at ${indicators.outputActivity.toFixed(1)} % RMS${indicators.dominantHz ? ` near ${indicators.dominantHz.toFixed(0)} Hz` : ''}. Gains may be too high for the resolution.`,
    };
  for (const decision of [decisions?.gain, decisions?.pole])
    if (decision?.state === 'signal' && decision.pooledRatio)
      return {
        state: 'drifting',
        reason: `${decision.quantity === 'gain' ? 'Gain K' : 'Pole α'} is moving ${decision.direction < 0 ? 'down' : 'up'}. ${percent(decision.pooledRatio.value)} off baseline, still within tolerance.`,
      };
  return { state: 'in-tune', reason: calm(estimate, baseline) };
}

function figures(estimate: PlantEstimate, baseline: Baseline, decisions: DriftDecisions): string {
  const parts: string[] = [];
  if (decisions.pole.state === 'drifted')
    parts.push(`Pole ${digits(baseline.pole)} → ${digits(estimate.pole.value)} rad/s`);
  if (decisions.gain.state === 'drifted')
    parts.push(`Gain ${digits(baseline.gain)} → ${digits(estimate.gain.value)} (mm/s)/%`);
  return `${parts.join('; ')}.`;
}

function calm(estimate: PlantEstimate | null, baseline: Baseline | null): string {
  if (!baseline) return 'No baseline yet. An engineer confirms the first usable estimate.';
  if (!estimate) return 'Listening. K and pole are not known from production moves yet.';
  if (estimate.verdict !== 'usable')
    return `Listening. ${sentence(capital(estimate.remarks[0] ?? 'the estimate is in doubt'))}`;
  const worst = Math.max(
    Math.abs(estimate.gain.value / baseline.gain - 1),
    Math.abs(estimate.pole.value / baseline.pole - 1),
  );
  return `K and pole within ${Math.max(1, Math.ceil(worst * 100))} % of baseline.`;
}

const digits = (value: number): string =>
  value >= 100 ? value.toFixed(0) : value >= 10 ? value.toFixed(1) : value.toFixed(2);
const capital = (text: string): string => text.charAt(0).toUpperCase() + text.slice(1);
const sentence = (text: string): string => (/[.!?]$/.test(text) ? text : `${text}.`);
