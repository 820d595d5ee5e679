export interface ChecklistItem {
  key: string;
  text: string;
}

/**
 * What the person at the machine confirms on every site, item by item, before gains may leave. Our own words; defers to
 * the site, whose administrator adds what is particular to it and can take none of these away.
 */
export const CHECKLIST: readonly ChecklistItem[] = [
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
];

/** A site's items are numbered for good: a page that was opened before an edit confirms nothing that it did not show. */
export const siteKey = (number: number): string => `site-${number}`;

/** Items that were not confirmed; only `true` confirms. */
export const missingFrom = (
  items: readonly ChecklistItem[],
  confirmed: Record<string, unknown>,
): ChecklistItem[] => items.filter(({ key }) => confirmed[key] !== true);
