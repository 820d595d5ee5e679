type CsvValue = string | number | boolean | null;

/**
 * A field as RFC 4180 has it. What a spreadsheet would take for a formula is made text by an apostrophe (OWASP, CSV
 * injection; from memory).
 */
function field(value: CsvValue): string {
  if (value === null) return '';
  const text = typeof value === 'string' && /^[=+\-@\t\r]/.test(value) ? `'${value}` : String(value);
  return /[",\r\n]/.test(text) ? `"${text.replaceAll('"', '""')}"` : text;
}

/** Rows as CSV by RFC 4180, the header row among them. */
export const csvText = (rows: readonly (readonly CsvValue[])[]): string =>
  rows.map((row) => `${row.map(field).join(',')}\r\n`).join('');
