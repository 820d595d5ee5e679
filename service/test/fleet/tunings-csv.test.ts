import { expect, test } from 'vitest';
import { tuningsCsv } from '../../src/fleet/tunings-csv.js';

test('tuning revisions as CSV: quoted where needed, formulas defused, numbers whole', () => {
  const csv = tuningsCsv([
    {
      revision: 2,
      current: true,
      structure: 'PI-D',
      pattern: { kind: 'triple', lambda: 30 },
      lambda: 30,
      feedForward: true,
      gains: { kp: 11.25, ki: 0.1 + 0.2, kd: -0.29, kv: 0.37, ka: 0.0041 },
      plant: null,
      source: 'proposal',
      proposalId: 7,
      appliedAt: new Date('2026-03-01T08:00:00Z'),
      appliedBy: '=HYPERLINK("x")',
      note: 'Heavier, since "Monday"\nsee note',
    },
  ]);
  expect(csv).toBe(
    'revision,applied_at,applied_by,source,proposal,structure,lambda_rad_per_s,feed_forward,kp,ki,kd,kv,ka,note\r\n' +
      `2,2026-03-01T08:00:00.000Z,"'=HYPERLINK(""x"")",proposal,7,PI-D,30,true,11.25,0.30000000000000004,-0.29,0.37,0.0041,"Heavier, since ""Monday""\nsee note"\r\n`,
  );
});
