import type { AlertState } from './alert.entity.js';

/** What can happen to an alert. The rule raises and clears, the axis's state suppresses, people do the rest. */
export const ALERT_STEPS = [
  'raise',
  'clear',
  'acknowledge',
  'shelve',
  'unshelve',
  'suppress',
  'unsuppress',
  'take-out-of-service',
  'return-to-service',
] as const;
export type AlertStep = (typeof ALERT_STEPS)[number];

/** Whether the rule's condition holds decides where an alert that was put aside comes back to. */
type Target = AlertState | { holding: AlertState; over: AlertState };

const COMES_BACK: Target = { holding: 'unacknowledged', over: 'normal' };

/**
 * The states and transitions, after ANSI/ISA-18.2 and IEC 62682 (from memory). What is not here is refused. An alert
 * that was put aside stays so when its condition goes or comes again; only what it comes back to changes.
 */
export const TRANSITIONS: Record<AlertState, Partial<Record<AlertStep, Target>>> = {
  normal: { raise: 'unacknowledged' },
  unacknowledged: {
    clear: 'returned-unacknowledged',
    acknowledge: 'acknowledged',
    shelve: 'shelved',
    suppress: 'suppressed',
    'take-out-of-service': 'out-of-service',
  },
  acknowledged: {
    clear: 'normal',
    shelve: 'shelved',
    suppress: 'suppressed',
    'take-out-of-service': 'out-of-service',
  },
  'returned-unacknowledged': {
    raise: 'unacknowledged',
    acknowledge: 'normal',
    shelve: 'shelved',
    suppress: 'normal',
    'take-out-of-service': 'out-of-service',
  },
  shelved: {
    raise: 'shelved',
    clear: 'shelved',
    unshelve: COMES_BACK,
    suppress: 'suppressed',
    'take-out-of-service': 'out-of-service',
  },
  suppressed: {
    raise: 'suppressed',
    clear: 'suppressed',
    unsuppress: COMES_BACK,
    'take-out-of-service': 'out-of-service',
  },
  'out-of-service': {
    raise: 'out-of-service',
    clear: 'out-of-service',
    'return-to-service': COMES_BACK,
  },
};

/**
 * The state after a step.
 *
 * @param holding whether the rule's condition holds now
 * @returns null when the state does not allow the step
 */
export function nextState(state: AlertState, step: AlertStep, holding: boolean): AlertState | null {
  const target = TRANSITIONS[state][step];
  if (target === undefined) return null;
  if (typeof target === 'string') return target;
  return holding ? target.holding : target.over;
}

/** What is so about an alert's axis and rule at one look. */
export interface Circumstances {
  /** Whether the rule's condition holds, delays counted in. */
  holds: boolean;
  /** Whether the level is back already and only the off-delay still runs: nothing new is said about it. */
  clearing: boolean;
  /** Why alerts of this rule are suppressed on this axis now; null when they are not. */
  suppression: 'maintenance' | 'gateway' | null;
  shelfOver: boolean;
}

/**
 * What the service itself does with an alert, or with the want of one, by what is so and not by what changed: after a
 * crash the next look does what is missing.
 *
 * A gateway that is down explains why its axes are silent; a shelf or an acknowledgement of that silence by a person
 * stays. Maintenance is a reason to see everything anew, so it ends a shelf.
 *
 * @param alert null when none is open
 */
export function stepsDue(
  alert: { state: AlertState; over: boolean } | null,
  { holds, clearing, suppression, shelfOver }: Circumstances,
): AlertStep[] {
  if (!alert) return holds && !clearing && !suppression ? ['raise'] : [];
  const { state } = alert;
  const steps: AlertStep[] = [];
  if (holds === alert.over) {
    // What has returned and is explained by now is not raised again.
    if (!(state === 'returned-unacknowledged' && suppression)) steps.push(holds ? 'raise' : 'clear');
  }
  if (suppression) {
    const gone = state === 'acknowledged' && !holds;
    const aside = state === 'suppressed' || state === 'out-of-service' || gone;
    const kept = suppression === 'gateway' && (state === 'shelved' || state === 'acknowledged');
    if (!aside && !(kept && !shelfOver)) steps.push('suppress');
  } else if (state === 'suppressed' && !clearing) steps.push('unsuppress');
  else if (state === 'shelved' && shelfOver) steps.push('unshelve');
  return steps;
}
