import type { SignedInUser } from './session';

export type Role = SignedInUser['roles'][number]['role'];

const TECHNICIAN_AND_UP: readonly Role[] = ['technician', 'engineer', 'approver'];
const ENGINEER_AND_UP: readonly Role[] = ['engineer', 'approver'];

/** What each role may do, for what a page shows; the service refuses by its own table. */
const POLICY = {
  'alert.acknowledge': TECHNICIAN_AND_UP,
  'alert.shelve': TECHNICIAN_AND_UP,
  'alert.out-of-service': ENGINEER_AND_UP,
  'alert-rule.change': ENGINEER_AND_UP,
  'axis.maintenance': TECHNICIAN_AND_UP,
  'axis.baseline': ENGINEER_AND_UP,
  'capture.take': TECHNICIAN_AND_UP,
  'proposal.work': ENGINEER_AND_UP,
  'checklist.change': ['administrator'],
  'rota.change': ['administrator'],
  'rota.override': [...TECHNICIAN_AND_UP, 'administrator'],
  'note.write': [...TECHNICIAN_AND_UP, 'administrator'],
  'people.manage': ['administrator'],
  'storage.manage': ['administrator'],
  'intake.read': [...ENGINEER_AND_UP, 'administrator'],
  'audit.read': [...ENGINEER_AND_UP, 'administrator'],
} as const satisfies Record<string, readonly Role[]>;

export type Action = keyof typeof POLICY;

/** Whether a person may do an action on a site, or, without a site, on any. */
export const may = (user: SignedInUser | null, action: Action, siteId?: number): boolean =>
  !!user?.roles.some(
    (entry) =>
      (siteId === undefined || entry.siteId === siteId) &&
      (POLICY[action] as readonly Role[]).includes(entry.role),
  );
