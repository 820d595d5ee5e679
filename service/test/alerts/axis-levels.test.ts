import { expect, test } from 'vitest';
import { AxisLevelsService } from '../../src/alerts/axis-levels.service.js';
import { idleTimer, lookAtLevel, RULE } from '../../src/alerts/rules.js';
import type { Axis } from '../../src/fleet/axis.entity.js';
import type { RecentSeconds } from '../../src/indicators/recent-seconds.js';
import type { IntakeService } from '../../src/telemetry/intake.service.js';

test('what a worse trial raised clears when the trial ends, however it ends', () => {
  const levels = new AxisLevelsService(
    { pipeline: () => undefined } as unknown as IntakeService,
    { over: () => null } as unknown as RecentSeconds,
  );
  const axis = { id: 1, tolerances: { followingError: 1, saturatedPct: 5 } } as Axis;
  const { measure, defaults } = RULE['trial-regression'];
  const timer = idleTimer();
  const look = (verdict: string | null, at: number): 'raise' | 'clear' | null =>
    lookAtLevel(
      timer,
      measure(levels.of(axis, new Date(at * 1000), verdict)),
      defaults.threshold,
      defaults.deadband,
      defaults,
      at,
    );
  expect(look('waiting', 1)).toBeNull();
  expect(look('worse', 2)).toBe('raise');
  expect(look('worse', 3)).toBeNull();
  expect(look(null, 4)).toBe('clear');
  expect(look(null, 5)).toBeNull();
});
