import type { Priority } from './alert.entity.js';

export const RULES = [
  'output-saturation',
  'following-error',
  'gain-drift',
  'pole-drift',
  'dry-friction',
  'output-activity',
  'no-signal',
  'trial-regression',
] as const;
export type RuleName = (typeof RULES)[number];

export const RULE_TITLES: Record<RuleName, string> = {
  'output-saturation': 'output at its limit',
  'following-error': 'following error beyond tolerance',
  'gain-drift': 'gain drift',
  'pole-drift': 'pole drift',
  'dry-friction': 'dry friction up',
  'output-activity': 'output hums',
  'no-signal': 'no signal',
  'trial-regression': 'worse on trial',
};

/** When a rule raises, clears and tells; delays in s. */
export interface RuleSettings {
  threshold: number;
  deadband: number;
  onDelay: number;
  offDelay: number;
  priority: Priority;
  mailAfter: number;
}

/** What the levels of an axis are at one moment; null where nothing can be said. */
export interface AxisLevels {
  /** % of moving time in the last minute with the output at its limit */
  saturatedPct: number | null;
  /** mm, largest in the last half minute of motion */
  peakFollowingError: number | null;
  /** % off baseline of the pooled estimate, 0 unless drift is decided */
  gainDriftPct: number | null;
  poleDriftPct: number | null;
  /** Coulomb friction above its baseline, % of output: the lower bound of its 95 % interval */
  frictionRise: number | null;
  /** % RMS above the loop's band in the last minute */
  outputActivity: number | null;
  /** Hz */
  dominantHz: number | null;
  /** s since the last sample arrived */
  silence: number | null;
  /** 1 while there is a trial whose verdict is "worse", else 0 */
  trialWorse: number;
  tolerances: { followingError: number; saturatedPct: number };
  /** What the evidence looks like, in a sentence; null when nothing is decided */
  cause: string | null;
  adviceInspect: boolean;
}

/** What a rule measures, in which unit, and what it tells a person. */
export interface Rule {
  unit: string;
  /** Threshold is in shares of the axis's tolerance (1 = the tolerance itself) or absolute. */
  relative: boolean;
  measure: (levels: AxisLevels) => number | null;
  /** Tolerance that a relative threshold multiplies. */
  tolerance: (levels: AxisLevels) => number;
  message: (value: number, threshold: number, levels: AxisLevels) => string;
  action: (levels: AxisLevels) => string;
  defaults: RuleSettings;
}

const mm = (value: number): string => (value < 0.1 ? value.toFixed(3) : value.toFixed(2));
const absolute = (): number => 1;
const INSPECT =
  'Inspect the mechanics and the supply before any retune: new gains around worn parts hide the fault.';

/** The rules by name. Their defaults are ours, chosen for axes that move every few seconds (no source). */
export const RULE: Record<RuleName, Rule> = {
  'output-saturation': {
    unit: '% of moving time',
    relative: true,
    measure: (levels) => levels.saturatedPct,
    tolerance: (levels) => levels.tolerances.saturatedPct,
    message: (value, threshold) =>
      `Output at its limit ${value.toFixed(1)} % of moving time, allowed ${threshold.toFixed(1)} %.`,
    action: (levels) =>
      levels.adviceInspect
        ? `${levels.cause ?? ''} ${INSPECT}`.trim()
        : 'Check supply pressure or bus voltage and the load first; slow the move if production allows. At its limit the loop cannot correct.',
    defaults: { threshold: 1, deadband: 0.2, onDelay: 15, offDelay: 60, priority: 'high', mailAfter: 60 },
  },
  'following-error': {
    unit: 'mm',
    relative: true,
    measure: (levels) => levels.peakFollowingError,
    tolerance: (levels) => levels.tolerances.followingError,
    message: (value, threshold) => `Following error reaches ${mm(value)} mm, allowed ${mm(threshold)} mm.`,
    action: () =>
      'Check the parts made since it began. Look for a change of load or tooling, then at the axis page.',
    defaults: { threshold: 1, deadband: 0.1, onDelay: 20, offDelay: 60, priority: 'high', mailAfter: 60 },
  },
  'gain-drift': {
    unit: '% off baseline',
    relative: false,
    measure: (levels) => levels.gainDriftPct,
    tolerance: absolute,
    message: (value, _, levels) =>
      `Plant gain K is ${Math.abs(value).toFixed(0)} % off its baseline, beyond tolerance.${levels.cause ? ` ${levels.cause}` : ''}`,
    action: (levels) => (levels.adviceInspect ? INSPECT : 'Look at the retune proposal for this axis.'),
    defaults: { threshold: 1, deadband: 0, onDelay: 0, offDelay: 30, priority: 'medium', mailAfter: 120 },
  },
  'pole-drift': {
    unit: '% off baseline',
    relative: false,
    measure: (levels) => levels.poleDriftPct,
    tolerance: absolute,
    message: (value, _, levels) =>
      `Plant pole α is ${Math.abs(value).toFixed(0)} % off its baseline, beyond tolerance.${levels.cause ? ` ${levels.cause}` : ''}`,
    action: (levels) => (levels.adviceInspect ? INSPECT : 'Look at the retune proposal for this axis.'),
    defaults: { threshold: 1, deadband: 0, onDelay: 0, offDelay: 30, priority: 'medium', mailAfter: 120 },
  },
  'dry-friction': {
    unit: '% of output',
    relative: false,
    measure: (levels) => levels.frictionRise,
    tolerance: absolute,
    message: (value) =>
      `Dry friction has risen by at least ${value.toFixed(1)} % of output since the baseline.`,
    action: () => `Look at guides, seals and lubrication. ${INSPECT}`,
    defaults: {
      threshold: 1.5,
      deadband: 0.3,
      onDelay: 20,
      offDelay: 120,
      priority: 'medium',
      mailAfter: 120,
    },
  },
  'output-activity': {
    unit: '% RMS',
    relative: false,
    measure: (levels) => levels.outputActivity,
    tolerance: absolute,
    message: (value, _, { dominantHz }) =>
      `Output hums: ${value.toFixed(1)} % RMS above the loop's band${dominantHz ? ` near ${dominantHz.toFixed(0)} Hz` : ''}.`,
    action: () =>
      'Compare the gains at the machine with the tuning revision here; gains too high for the resolution make the drive hum and heat.',
    defaults: { threshold: 3, deadband: 0.5, onDelay: 30, offDelay: 60, priority: 'low', mailAfter: 300 },
  },
  'no-signal': {
    unit: 's',
    relative: false,
    measure: (levels) => levels.silence,
    tolerance: absolute,
    message: (value) => `No samples for ${value.toFixed(0)} s.`,
    action: () =>
      'See whether the machine is switched off, then the gateway and the network. The axis is not being watched.',
    defaults: { threshold: 10, deadband: 5, onDelay: 0, offDelay: 5, priority: 'medium', mailAfter: 120 },
  },
  'trial-regression': {
    unit: '',
    relative: false,
    measure: (levels) => levels.trialWorse,
    tolerance: absolute,
    message: () => 'On trial the axis does worse than before with the same moves.',
    action: () => 'Roll the proposal back, or put the axis in maintenance until an engineer has looked.',
    defaults: { threshold: 1, deadband: 0, onDelay: 0, offDelay: 0, priority: 'high', mailAfter: 60 },
  },
};

/** How long a level has been beyond its threshold, or back from it. */
export interface RuleTimer {
  active: boolean;
  /** s; when the present crossing began, null while there is none */
  since: number | null;
}

/**
 * One look at a level: it raises after `onDelay` seconds at or above the threshold without a break, and clears after
 * `offDelay` seconds below threshold − deadband. Between the two nothing changes. An unknown level changes nothing.
 *
 * @param at s, never going back
 * @returns what to do now; `timer` is updated
 */
export function lookAtLevel(
  timer: RuleTimer,
  value: number | null,
  threshold: number,
  deadband: number,
  settings: Pick<RuleSettings, 'onDelay' | 'offDelay'>,
  at: number,
): 'raise' | 'clear' | null {
  if (value === null) return null;
  const crossed = timer.active ? value < threshold - deadband : value >= threshold;
  if (!crossed) {
    timer.since = null;
    return null;
  }
  timer.since ??= at;
  if (at - timer.since < (timer.active ? settings.offDelay : settings.onDelay)) return null;
  timer.active = !timer.active;
  timer.since = null;
  return timer.active ? 'raise' : 'clear';
}
