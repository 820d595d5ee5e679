import type { AlertState } from './alert.entity.js';

/** What can happen to an alert. `raise` and `clear` come from the rule, the others from people or the axis's state. */
export type AlertStep = 'raise' | 'clear' | 'acknowledge' | 'shelve' | 'unshelve' | 'suppress' | 'unsuppress';

/** Whether the rule's condition holds decides where a shelved or suppressed alert comes back to. */
type Target = AlertState | { holding: AlertState; over: AlertState };

const COMES_BACK: Target = { holding: 'unacknowledged', over: 'normal' };

/** The states and transitions, after ANSI/ISA-18.2 and IEC 62682 (from memory). What is not here is refused. */
export const TRANSITIONS: Record<AlertState, Partial<Record<AlertStep, Target>>> = {
  normal: { raise: 'unacknowledged' },
  unacknowledged: {
    clear: 'returned-unacknowledged',
    acknowledge: 'acknowledged',
    shelve: 'shelved',
    suppress: 'suppressed',
  },
  acknowledged: { clear: 'normal', shelve: 'shelved', suppress: 'suppressed' },
  'returned-unacknowledged': {
    raise: 'unacknowledged',
    acknowledge: 'normal',
    shelve: 'shelved',
    suppress: 'normal',
  },
  shelved: { unshelve: COMES_BACK, suppress: 'suppressed' },
  suppressed: { unsuppress: COMES_BACK },
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
