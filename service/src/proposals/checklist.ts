/** What the person at the machine confirms, item by item, before gains may leave. Our own words; defers to the site. */
export const CHECKLIST = [
  {
    key: 'people-clear',
    text: 'People are clear of the axis and everything it can reach; unexpected motion is possible.',
  },
  {
    key: 'site-procedures',
    text: 'The site’s lockout/tagout and machine-safety procedures and local codes are followed.',
  },
  { key: 'authorised', text: 'I am authorised and competent to change gains on this machine.' },
  { key: 'emergency-stop', text: 'The emergency stop is in reach and has been tried.' },
  { key: 'axis-at-rest', text: 'The axis is at rest and out of production.' },
  { key: 'reduced-speed', text: 'The first moves afterwards will be at reduced speed.' },
] as const;

export type ChecklistKey = (typeof CHECKLIST)[number]['key'];

/** Keys that were not confirmed. */
export const missingFrom = (confirmed: Record<string, unknown>): ChecklistKey[] =>
  CHECKLIST.filter(({ key }) => confirmed[key] !== true).map(({ key }) => key);
