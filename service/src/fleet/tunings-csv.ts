import type { TuningRevisionDto } from './dto/history.dto.js';

const HEAD = [
  'revision',
  'applied_at',
  'applied_by',
  'source',
  'proposal',
  'structure',
  'lambda_rad_per_s',
  'feed_forward',
  'kp',
  'ki',
  'kd',
  'kv',
  'ka',
  'note',
];

/**
 * A field as RFC 4180 has it. What a spreadsheet would take for a formula is made text by an apostrophe (OWASP, CSV
 * injection; from memory).
 */
function field(value: string | number | boolean | null): string {
  if (value === null) return '';
  const text = typeof value === 'string' && /^[=+\-@\t\r]/.test(value) ? `'${value}` : String(value);
  return /[",\r\n]/.test(text) ? `"${text.replaceAll('"', '""')}"` : text;
}

/** Tuning revisions as CSV (RFC 4180, header row): gains in %/mm, %/(mm·s), %·s/mm, %·s/mm, %·s²/mm. */
export const tuningsCsv = (tunings: readonly TuningRevisionDto[]): string =>
  [
    HEAD,
    ...tunings.map(
      ({ revision, appliedAt, appliedBy, source, proposalId, structure, lambda, feedForward, gains, note }) =>
        [
          revision,
          appliedAt.toISOString(),
          appliedBy,
          source,
          proposalId,
          structure,
          lambda,
          feedForward,
          gains.kp,
          gains.ki,
          gains.kd,
          gains.kv ?? 0,
          gains.ka ?? 0,
          note,
        ].map(field),
    ),
  ]
    .map((row) => `${row.join(',')}\r\n`)
    .join('');
