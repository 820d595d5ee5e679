import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { ALERT_STATES, type AlertState } from '../../src/alerts/alert.entity.js';
import { nextState, type AlertStep } from '../../src/alerts/life-cycle.js';
import { lookAtLevel, RULE, RULES, type AxisLevels, type RuleTimer } from '../../src/alerts/rules.js';

const STEPS: AlertStep[] = ['raise', 'clear', 'acknowledge', 'shelve', 'unshelve', 'suppress', 'unsuppress'];

/**
 * Every state and step: what follows while the condition holds / once it is over; a dash is a refusal. After the
 * state diagram of ANSI/ISA-18.2 (from memory), where acknowledging what has already returned ends the alert.
 */
const TABLE: Record<AlertState, Partial<Record<AlertStep, [AlertState, AlertState]>>> = {
  normal: { raise: ['unacknowledged', 'unacknowledged'] },
  unacknowledged: {
    clear: ['returned-unacknowledged', 'returned-unacknowledged'],
    acknowledge: ['acknowledged', 'acknowledged'],
    shelve: ['shelved', 'shelved'],
    suppress: ['suppressed', 'suppressed'],
  },
  acknowledged: {
    clear: ['normal', 'normal'],
    shelve: ['shelved', 'shelved'],
    suppress: ['suppressed', 'suppressed'],
  },
  'returned-unacknowledged': {
    raise: ['unacknowledged', 'unacknowledged'],
    acknowledge: ['normal', 'normal'],
    shelve: ['shelved', 'shelved'],
    suppress: ['normal', 'normal'],
  },
  shelved: { unshelve: ['unacknowledged', 'normal'], suppress: ['suppressed', 'suppressed'] },
  suppressed: { unsuppress: ['unacknowledged', 'normal'] },
};

describe('the life of an alert', () => {
  for (const state of ALERT_STATES)
    for (const step of STEPS) {
      const [holding, over] = TABLE[state][step] ?? [null, null];
      test(`${state}, ${step}: ${holding === over ? (holding ?? 'refused') : `${holding} or ${over}`}`, () => {
        expect(nextState(state, step, true)).toBe(holding);
        expect(nextState(state, step, false)).toBe(over);
      });
    }

  test('nobody can be left unaware: an unacknowledged alert ends only by a person or by design', () => {
    for (const step of STEPS)
      for (const holding of [true, false])
        if (nextState('unacknowledged', step, holding) === 'normal') expect(step).toBe('acknowledge');
  });
});

describe('a look at a level', () => {
  const delays = { onDelay: 10, offDelay: 30 };
  /** Looks once a second, and gives the verdicts that are not null with their time. */
  function watch(values: (number | null)[], timer: RuleTimer = { active: false, since: null }): string[] {
    return values.flatMap((value, at) => {
      const verdict = lookAtLevel(timer, value, 5, 1, delays, at);
      return verdict ? [`${verdict} at ${at}`] : [];
    });
  }
  const hold = (value: number | null, seconds: number): (number | null)[] =>
    new Array<number | null>(seconds).fill(value);

  test('raises when it has been at the threshold for the on-delay without a break', () => {
    expect(watch(hold(5, 10))).toEqual([]);
    expect(watch(hold(5, 11))).toEqual(['raise at 10']);
    expect(watch([...hold(9, 9), 4.99, ...hold(9, 10)])).toEqual([]);
    expect(watch([...hold(9, 9), 4.99, ...hold(9, 11)])).toEqual(['raise at 20']);
  });

  test('clears when it has been below threshold − deadband for the off-delay without a break', () => {
    const active = (): RuleTimer => ({ active: true, since: null });
    expect(watch(hold(3.9, 31), active())).toEqual(['clear at 30']);
    expect(watch(hold(4, 200), active())).toEqual([]); // inside the deadband
    expect(watch([...hold(3, 29), 4.5, ...hold(3, 31)], active())).toEqual(['clear at 60']);
  });

  test('raises once, clears once, and can raise again', () => {
    expect(watch([...hold(8, 60), ...hold(1, 60), ...hold(8, 60)])).toEqual([
      'raise at 10',
      'clear at 90',
      'raise at 130',
    ]);
  });

  test('without delays acts at the first look', () => {
    const timer: RuleTimer = { active: false, since: null };
    const none = { onDelay: 0, offDelay: 0 };
    expect(lookAtLevel(timer, 5, 5, 1, none, 100)).toBe('raise');
    expect(lookAtLevel(timer, 5, 5, 1, none, 101)).toBeNull();
    expect(lookAtLevel(timer, 3, 5, 1, none, 102)).toBe('clear');
  });

  test('an unknown level changes nothing, also not how long the crossing has lasted', () => {
    expect(watch([...hold(8, 5), ...hold(null, 100), 8])).toEqual(['raise at 105']);
    expect(watch(hold(null, 100))).toEqual([]);
    expect(watch(hold(null, 100), { active: true, since: null })).toEqual([]);
  });

  test('raise and clear take turns, whatever the level does', () => {
    fc.assert(
      fc.property(
        fc.array(fc.option(fc.double({ min: 0, max: 10, noNaN: true })), { maxLength: 400 }),
        (values) => {
          const verdicts = watch(values).map((text) => text.split(' ')[0]);
          expect(verdicts).toEqual(verdicts.map((_, k) => (k % 2 === 0 ? 'raise' : 'clear')));
        },
      ),
    );
  });
});

describe('every rule', () => {
  const levels: AxisLevels = {
    saturatedPct: 7.25,
    peakFollowingError: 0.081,
    gainDriftPct: 21,
    poleDriftPct: 33,
    frictionRise: 2.4,
    outputActivity: 4.6,
    dominantHz: 47,
    silence: 12,
    trialWorse: 1,
    tolerances: { followingError: 0.05, saturatedPct: 5 },
    cause: 'Looks like load up.',
    adviceInspect: false,
  };
  test.each(RULES)('%s says in whole sentences what is and what to do', (name) => {
    const rule = RULE[name];
    const value = rule.measure(levels);
    expect(value).not.toBeNull();
    const message = rule.message(value!, rule.defaults.threshold * rule.tolerance(levels), levels);
    for (const text of [message, rule.action(levels), rule.action({ ...levels, adviceInspect: true })]) {
      expect(text).toMatch(/^[A-Z].*\.$/);
      expect(text).not.toMatch(/null|undefined|NaN/);
    }
    // The value is beyond the rule's own default.
    expect(value!).toBeGreaterThanOrEqual(
      rule.defaults.threshold * (rule.relative ? rule.tolerance(levels) : 1),
    );
  });

  test('wear is to be inspected before a retune', () => {
    for (const name of ['gain-drift', 'pole-drift', 'dry-friction', 'output-saturation'] as const)
      expect(RULE[name].action({ ...levels, adviceInspect: true })).toMatch(/[Ii]nspect/);
    expect(RULE['pole-drift'].action(levels)).toMatch(/proposal/);
  });
});
