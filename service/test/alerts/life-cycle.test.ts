import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { ALERT_STATES, type AlertState } from '../../src/alerts/alert.entity.js';
import {
  ALERT_STEPS,
  nextState,
  stepsDue,
  type AlertStep,
  type Circumstances,
} from '../../src/alerts/life-cycle.js';
import {
  idleTimer,
  lookAtLevel,
  RULE,
  RULES,
  type AxisLevels,
  type RuleTimer,
} from '../../src/alerts/rules.js';

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
    'take-out-of-service': ['out-of-service', 'out-of-service'],
  },
  acknowledged: {
    clear: ['normal', 'normal'],
    shelve: ['shelved', 'shelved'],
    suppress: ['suppressed', 'suppressed'],
    'take-out-of-service': ['out-of-service', 'out-of-service'],
  },
  'returned-unacknowledged': {
    raise: ['unacknowledged', 'unacknowledged'],
    acknowledge: ['normal', 'normal'],
    shelve: ['shelved', 'shelved'],
    suppress: ['normal', 'normal'],
    'take-out-of-service': ['out-of-service', 'out-of-service'],
  },
  shelved: {
    raise: ['shelved', 'shelved'],
    clear: ['shelved', 'shelved'],
    unshelve: ['unacknowledged', 'normal'],
    suppress: ['suppressed', 'suppressed'],
    'take-out-of-service': ['out-of-service', 'out-of-service'],
  },
  suppressed: {
    raise: ['suppressed', 'suppressed'],
    clear: ['suppressed', 'suppressed'],
    unsuppress: ['unacknowledged', 'normal'],
    'take-out-of-service': ['out-of-service', 'out-of-service'],
  },
  'out-of-service': {
    raise: ['out-of-service', 'out-of-service'],
    clear: ['out-of-service', 'out-of-service'],
    'return-to-service': ['unacknowledged', 'normal'],
  },
};

describe('the life of an alert', () => {
  for (const state of ALERT_STATES)
    for (const step of ALERT_STEPS) {
      const [holding, over] = TABLE[state][step] ?? [null, null];
      test(`${state}, ${step}: ${holding === over ? (holding ?? 'refused') : `${holding} or ${over}`}`, () => {
        expect(nextState(state, step, true)).toBe(holding);
        expect(nextState(state, step, false)).toBe(over);
      });
    }

  test('nobody can be left unaware: an unacknowledged alert ends only by a person or by design', () => {
    for (const step of ALERT_STEPS)
      for (const holding of [true, false])
        if (nextState('unacknowledged', step, holding) === 'normal') expect(step).toBe('acknowledge');
  });
});

describe('a look at a level', () => {
  const delays = { onDelay: 10, offDelay: 30, unknownAfter: 300 };
  /** Looks once a second, and gives the verdicts that are not null with their time. */
  function watch(values: (number | null)[], timer: RuleTimer = idleTimer()): string[] {
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
    const active = (): RuleTimer => ({ ...idleTimer(), active: true });
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
    const timer = idleTimer();
    const none = { onDelay: 0, offDelay: 0, unknownAfter: 300 };
    expect(lookAtLevel(timer, 5, 5, 1, none, 100)).toBe('raise');
    expect(lookAtLevel(timer, 5, 5, 1, none, 101)).toBeNull();
    expect(lookAtLevel(timer, 3, 5, 1, none, 102)).toBe('clear');
  });

  test('an unknown level changes nothing, also not how long the crossing has lasted', () => {
    expect(watch([...hold(8, 5), ...hold(null, 100), 8])).toEqual(['raise at 105']);
    expect(watch(hold(null, 100))).toEqual([]);
    expect(watch(hold(null, 100), { ...idleTimer(), active: true })).toEqual([]);
  });

  test('a level that stays unknown ends what it raised; one that comes back in time does not', () => {
    const active = (): RuleTimer => ({ ...idleTimer(), active: true });
    expect(watch(hold(null, 301), active())).toEqual(['clear at 300']);
    expect(watch([...hold(null, 299), 8, ...hold(null, 299)], active())).toEqual([]);
    // Gone and measured again: it is raised anew after its on-delay.
    expect(watch([...hold(null, 301), ...hold(8, 11)], active())).toEqual(['clear at 300', 'raise at 311']);
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

/** One axis and rule as the service treats it: timer, life cycle and what people do, without a database. */
class Model {
  alert: { state: AlertState; over: boolean; shelfEnd: number } | null = null;
  readonly timer = idleTimer();
  level: number | null = 0;
  maintenance = false;
  gatewayDown = false;
  at = 0;

  static readonly DELAYS = { onDelay: 10, offDelay: 30, unknownAfter: 300 };

  get suppression(): Circumstances['suppression'] {
    return this.maintenance ? 'maintenance' : this.gatewayDown ? 'gateway' : null;
  }

  get clearing(): boolean {
    return this.timer.active && this.timer.since !== null;
  }

  look(): void {
    lookAtLevel(this.timer, this.level, 5, 1, Model.DELAYS, this.at);
    const due = stepsDue(this.alert, {
      holds: this.timer.active,
      clearing: this.clearing,
      suppression: this.suppression,
      shelfOver: this.alert?.state === 'shelved' && this.alert.shelfEnd <= this.at,
    });
    for (const step of due) {
      this.alert ??= { state: 'normal', over: true, shelfEnd: 0 };
      // What the service wants is never refused by the table.
      expect(this.take(step)).toBe(true);
    }
  }

  take(step: AlertStep): boolean {
    const next = this.alert && nextState(this.alert.state, step, !this.alert.over);
    if (!this.alert || next === null) return false;
    this.alert.state = next;
    if (step === 'raise') this.alert.over = false;
    if (step === 'clear') this.alert.over = true;
    if (step === 'shelve') this.alert.shelfEnd = this.at + 100;
    if (next === 'normal') this.alert = null;
    return true;
  }
}

test('no sequence of events leaves an alert that nobody can see or end', () => {
  const event = fc.oneof(
    fc.record({ level: fc.constantFrom(0, 4.5, 9, null) }),
    fc.record({ wait: fc.constantFrom(1, 11, 31, 101, 301) }),
    fc.record({ maintenance: fc.boolean() }),
    fc.record({ gatewayDown: fc.boolean() }),
    fc.record({
      person: fc.constantFrom<AlertStep>(
        'acknowledge',
        'shelve',
        'unshelve',
        'take-out-of-service',
        'return-to-service',
      ),
    }),
  );
  const seen = new Set<AlertState>();
  fc.assert(
    fc.property(
      fc.array(event, { minLength: 10, maxLength: 60, size: 'max' }),
      fc.constantFrom(0, null),
      (events, last) => {
        const model = new Model();
        for (const happens of events) {
          if ('person' in happens) model.take(happens.person);
          else if ('wait' in happens) model.at += happens.wait;
          else Object.assign(model, happens);
          model.look();
          if (model.alert) seen.add(model.alert.state);
          // What holds is told of, unless by design or by a person it is not.
          if (model.timer.active && !model.suppression && !model.clearing) expect(model.alert).not.toBeNull();
          if (model.alert) expect(model.alert.over).toBe(!model.timer.active);
          if (model.alert?.state === 'suppressed') expect(model.suppression ?? model.clearing).toBeTruthy();
          if (model.alert?.state === 'shelved') expect(model.alert.shelfEnd).toBeGreaterThan(model.at);
        }
        // Whatever happened: production again, the level low or never known again, and one person who tidies up.
        Object.assign(model, { maintenance: false, gatewayDown: false, level: last });
        for (let k = 0; k < 3; k++) {
          model.take('return-to-service');
          model.take('acknowledge');
          model.at += 301;
          model.look();
        }
        model.take('acknowledge');
        expect(model.alert).toBeNull();
      },
    ),
    { numRuns: 500 },
  );
  // The events reach every state that an open alert can have.
  expect([...seen].sort()).toEqual(ALERT_STATES.filter((state) => state !== 'normal').sort());
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
