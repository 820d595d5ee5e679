/**
 * JSON with its object keys in code-point order and without white space, so that equal values give equal text. Dates are
 * written as ISO 8601; `undefined` members are left out. After RFC 8785 (from memory), whose number and string forms are
 * those of `JSON.stringify`.
 */
export function canonicalJson(value: unknown): string {
  return JSON.stringify(value, (_key, member: unknown) =>
    member !== null && typeof member === 'object' && !Array.isArray(member)
      ? Object.fromEntries(Object.entries(member).sort(([a], [b]) => (a < b ? -1 : 1)))
      : member,
  );
}
