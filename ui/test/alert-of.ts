import type { Alert } from '../src/features/alerts/alerts-api';

export const RAISED = new Date(Date.now() - 12 * 60_000).toISOString();

/** An alert that waits for somebody, with what differs. */
export const alertOf = (differs: Partial<Alert>): Alert => ({
  id: 7,
  siteId: 1,
  siteName: 'Tile Hall',
  timeZone: 'Europe/London',
  machineName: 'Tile press',
  axisId: 3,
  axisTag: 'PR-01 ram',
  axisName: 'Press ram',
  rule: 'output-saturation',
  title: 'output at its limit',
  priority: 'high',
  state: 'unacknowledged',
  raisedAt: RAISED,
  acknowledgedAt: null,
  acknowledgedBy: null,
  returnedAt: null,
  shelvedUntil: null,
  shelvedBy: null,
  shelveReason: null,
  value: 18.4,
  threshold: 5,
  unit: '%',
  message: 'Output at its limit for 18.4 % of moving time, allowed 5 %',
  action: 'check supply pressure at the press manifold',
  nextStepAt: null,
  proposalId: null,
  events: [],
  ...differs,
});
