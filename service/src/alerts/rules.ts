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

/** When a rule raises, clears and tells, and what it tells; delays in s. */
export interface RuleSettings {
  threshold: number;
  deadband: number;
  onDelay: number;
  offDelay: number;
  priority: Priority;
  /** Time without acknowledgement before the person on call gets a mail. */
  mailAfter: number;
  /** How long the level must be unknown before what it raised counts as over. */
  unknownAfter: number;
  /** In which somebody should respond. */
  respondWithin: number;
  /** What happens when nobody does anything. */
  consequence: string;
  /** Instead of what the rule works out from the evidence; null: as worked out. */
  whatToDo: string | null;
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
  tolerance: (levels: Pick<AxisLevels, 'tolerances'>) => number;
  message: (value: number, threshold: number, levels: AxisLevels) => string;
  action: (levels: AxisLevels) => string;
  defaults: RuleSettings;
  /** Whether the axis's maintenance says nothing about it. */
  alsoInMaintenance?: true;
}

const mm = (value: number): string => (value < 0.1 ? value.toFixed(3) : value.toFixed(2));
const absolute = (): number => 1;
const INSPECT =
  'Inspect the mechanics and the supply before any retune: new gains around worn parts hide the fault.';

/** s in which somebody should respond, and how long an unknown level keeps an alert (ours, no source). */
const RESPOND_WITHIN: Record<Priority, number> = { high: 15 * 60, medium: 4 * 3_600, low: 24 * 3_600 };
const UNKNOWN_AFTER = 24 * 3_600;

const settings = (own: Omit<RuleSettings, 'unknownAfter' | 'respondWithin' | 'whatToDo'>): RuleSettings => ({
  ...own,
  unknownAfter: UNKNOWN_AFTER,
  respondWithin: RESPOND_WITHIN[own.priority],
  whatToDo: null,
});

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
    defaults: settings({
      threshold: 1,
      deadband: 0.2,
      onDelay: 15,
      offDelay: 60,
      priority: 'high',
      mailAfter: 60,
      consequence:
        'The loop cannot correct any further: following error grows, the move takes longer or the part is scrapped.',
    }),
  },
  'following-error': {
    unit: 'mm',
    relative: true,
    measure: (levels) => levels.peakFollowingError,
    tolerance: (levels) => levels.tolerances.followingError,
    message: (value, threshold) => `Following error reaches ${mm(value)} mm, allowed ${mm(threshold)} mm.`,
    action: () =>
      'Check the parts made since it began. Look for a change of load or tooling, then at the axis page.',
    defaults: settings({
      threshold: 1,
      deadband: 0.1,
      onDelay: 20,
      offDelay: 60,
      priority: 'high',
      mailAfter: 60,
      consequence: 'Parts are made out of tolerance.',
    }),
  },
  'gain-drift': {
    unit: '% off baseline',
    relative: false,
    measure: (levels) => levels.gainDriftPct,
    tolerance: absolute,
    message: (value, _, levels) =>
      `Plant gain K is ${Math.abs(value).toFixed(0)} % off its baseline, beyond tolerance.${levels.cause ? ` ${levels.cause}` : ''}`,
    action: (levels) => (levels.adviceInspect ? INSPECT : 'Look at the retune proposal for this axis.'),
    defaults: settings({
      threshold: 1,
      deadband: 0,
      onDelay: 0,
      offDelay: 30,
      priority: 'medium',
      mailAfter: 120,
      consequence: 'The loop is slower or less damped than it was designed; following error grows unseen.',
    }),
  },
  'pole-drift': {
    unit: '% off baseline',
    relative: false,
    measure: (levels) => levels.poleDriftPct,
    tolerance: absolute,
    message: (value, _, levels) =>
      `Plant pole α is ${Math.abs(value).toFixed(0)} % off its baseline, beyond tolerance.${levels.cause ? ` ${levels.cause}` : ''}`,
    action: (levels) => (levels.adviceInspect ? INSPECT : 'Look at the retune proposal for this axis.'),
    defaults: settings({
      threshold: 1,
      deadband: 0,
      onDelay: 0,
      offDelay: 30,
      priority: 'medium',
      mailAfter: 120,
      consequence: 'The loop is less damped than it was designed; it may overshoot or hum.',
    }),
  },
  'dry-friction': {
    unit: '% of output',
    relative: false,
    measure: (levels) => levels.frictionRise,
    tolerance: absolute,
    message: (value) =>
      `Dry friction has risen by at least ${value.toFixed(1)} % of output since the baseline.`,
    action: () => `Look at guides, seals and lubrication. ${INSPECT}`,
    defaults: settings({
      threshold: 1.5,
      deadband: 0.3,
      onDelay: 20,
      offDelay: 120,
      priority: 'medium',
      mailAfter: 120,
      consequence: 'Guides, seals and drive wear on; the axis sticks and hunts at rest.',
    }),
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
    defaults: settings({
      threshold: 3,
      deadband: 0.5,
      onDelay: 30,
      offDelay: 60,
      priority: 'low',
      mailAfter: 300,
      consequence: 'The drive heats, valves and bearings wear.',
    }),
  },
  'no-signal': {
    unit: 's',
    relative: false,
    measure: (levels) => levels.silence,
    tolerance: absolute,
    message: (value) => `No samples for ${value.toFixed(0)} s.`,
    action: () =>
      'See whether the machine is switched off, then the gateway and the network. The axis is not being watched.',
    defaults: settings({
      threshold: 10,
      deadband: 5,
      onDelay: 0,
      offDelay: 5,
      priority: 'medium',
      mailAfter: 120,
      consequence: 'Nobody sees what the axis does.',
    }),
  },
  'trial-regression': {
    unit: '',
    relative: false,
    measure: (levels) => levels.trialWorse,
    tolerance: absolute,
    message: () => 'On trial the axis does worse than before with the same moves.',
    alsoInMaintenance: true,
    action: () => 'Roll the proposal back, or put the axis in maintenance until an engineer has looked.',
    defaults: settings({
      threshold: 1,
      deadband: 0,
      onDelay: 0,
      offDelay: 0,
      priority: 'high',
      mailAfter: 60,
      consequence: 'Production runs with gains that do worse than the former ones.',
    }),
  },
};

/** How long a level has been beyond its threshold, or back from it. */
export interface RuleTimer {
  active: boolean;
  /** s; when the present crossing began, null while there is none */
  since: number | null;
  /** s; since when the level of a condition that holds is unknown, null while it is known */
  unknownSince: number | null;
}

export const idleTimer = (): RuleTimer => ({ active: false, since: null, unknownSince: null });

/** The threshold on an axis, in the unit of what is measured: relative ones are shares of its own tolerance. */
export const thresholdOn = (
  rule: RuleName,
  { threshold, deadband }: Pick<RuleSettings, 'threshold' | 'deadband'>,
  levels: Pick<AxisLevels, 'tolerances'>,
): { threshold: number; deadband: number } => {
  const scale = RULE[rule].relative ? RULE[rule].tolerance(levels) : 1;
  return { threshold: threshold * scale, deadband: deadband * scale };
};

/** What an alert tells to do. A text of the site's own never hides that parts are to be inspected first. */
export const actionOf = (rule: RuleName, { whatToDo }: RuleSettings, levels: AxisLevels): string =>
  whatToDo === null ? RULE[rule].action(levels) : levels.adviceInspect ? `${INSPECT} ${whatToDo}` : whatToDo;

/**
 * One look at a level: it raises after `onDelay` seconds at or above the threshold without a break, and clears after
 * `offDelay` seconds below threshold − deadband. Between the two nothing changes. An unknown level changes nothing
 * either, until it has been unknown for `unknownAfter` seconds: then what it raised counts as over.
 *
 * @param at s, never going back
 * @returns what changed now; `timer` is updated
 */
export function lookAtLevel(
  timer: RuleTimer,
  value: number | null,
  threshold: number,
  deadband: number,
  settings: Pick<RuleSettings, 'onDelay' | 'offDelay' | 'unknownAfter'>,
  at: number,
): 'raise' | 'clear' | null {
  if (value === null) {
    if (!timer.active) return null;
    timer.unknownSince ??= at;
    if (at - timer.unknownSince < settings.unknownAfter) return null;
    Object.assign(timer, idleTimer());
    return 'clear';
  }
  timer.unknownSince = null;
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
