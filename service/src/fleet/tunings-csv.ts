import { csvText } from '../csv-text.js';
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

/** Tuning revisions as CSV (RFC 4180, header row): gains in %/mm, %/(mm·s), %·s/mm, %·s/mm, %·s²/mm. */
export const tuningsCsv = (tunings: readonly TuningRevisionDto[]): string =>
  csvText([
    HEAD,
    ...tunings.map(
      ({
        revision,
        appliedAt,
        appliedBy,
        source,
        proposalId,
        structure,
        lambda,
        feedForward,
        gains,
        note,
      }) => [
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
      ],
    ),
  ]);
