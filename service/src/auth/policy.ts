/** What a person can be on a site. One role per person and site. */
export const ROLES = ['viewer', 'technician', 'engineer', 'approver', 'administrator'] as const;
export type Role = (typeof ROLES)[number];

const TECHNICIAN_AND_UP: readonly Role[] = ['technician', 'engineer', 'approver'];
const ENGINEER_AND_UP: readonly Role[] = ['engineer', 'approver'];
const APPROVER: readonly Role[] = ['approver'];
const ADMINISTRATOR: readonly Role[] = ['administrator'];

/**
 * Who may do what: the one table behind every guard. Seeing needs any role on the site and is not listed.
 * An administrator has no tuning rights by that role alone.
 */
export const POLICY = {
  'alert.acknowledge': TECHNICIAN_AND_UP,
  'alert.shelve': TECHNICIAN_AND_UP,
  'alert.note': TECHNICIAN_AND_UP,
  'alert.out-of-service': ENGINEER_AND_UP,
  'alert-rule.change': ENGINEER_AND_UP,
  'axis.maintenance': TECHNICIAN_AND_UP,
  'axis.register': ENGINEER_AND_UP,
  'axis.change': ENGINEER_AND_UP,
  'axis.baseline': ENGINEER_AND_UP,
  'capture.take': TECHNICIAN_AND_UP,
  'machine.register': ENGINEER_AND_UP,
  'proposal.work': ENGINEER_AND_UP,
  'proposal.discuss': ROLES,
  'proposal.approve': APPROVER,
  'proposal.schedule': ENGINEER_AND_UP,
  'proposal.apply': TECHNICIAN_AND_UP,
  'proposal.keep': ENGINEER_AND_UP,
  'proposal.roll-back': TECHNICIAN_AND_UP,
  'checklist.change': ADMINISTRATOR,
  'rota.change': ADMINISTRATOR,
  'rota.override': ['technician', 'engineer', 'approver', 'administrator'],
  'note.write': ['technician', 'engineer', 'approver', 'administrator'],
  'site.register': ADMINISTRATOR,
  'gateway.register': ADMINISTRATOR,
  'intake.read': ['engineer', 'approver', 'administrator'],
  'people.manage': ADMINISTRATOR,
  'mail.manage': ADMINISTRATOR,
  'storage.manage': ADMINISTRATOR,
  'audit.read': ['engineer', 'approver', 'administrator'],
} as const satisfies Record<string, readonly Role[]>;

export type Action = keyof typeof POLICY;

/** Whether a role may do an action. */
export const mayDo = (role: Role, action: Action): boolean =>
  (POLICY[action] as readonly Role[]).includes(role);
