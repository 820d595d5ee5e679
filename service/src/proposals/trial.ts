import type { Interval } from '../identification/plant-estimate.js';
import type { RecordedMove } from '../indicators/move-recorder.js';
import { median, rankTest, shiftBetween } from './rank-statistics.js';

/** A figure of the same kind of moves before and after new gains: medians, and whether they differ. */
export interface ComparedFigure {
  before: number;
  /** For the same mix of kinds as before. */
  after: number;
  /** One-sided p that "after" is no larger than "before" (rank test); small means worse. */
  pWorse: number;
  /** One-sided p that "after" is no smaller; small means better. */
  pBetter: number;
  /** By how much with its 95 % interval: % of before; of a figure in %, points. Trials before 2026-12 lack it. */
  change?: Interval;
}

export interface TrialResult {
  /** ISO 8601 */
  startedAt: string;
  moves: { before: number; after: number };
  /** null until there are enough moves */
  peakFollowingError: ComparedFigure | null;
  rmsFollowingError: ComparedFigure | null;
  saturatedPct: ComparedFigure | null;
  verdict: 'waiting' | 'better' | 'no different' | 'worse';
  sentence: string;
}

/** Moves of one kind needed on both sides. */
export const LEAST_MOVES = 8;
/** Moves are of one kind when distance and duration agree within this share, and the direction is the same. */
const KIND_TOLERANCE = 0.05;
/** Level of the rank test. */
const LEVEL = 0.01;
/** Differences smaller than this share of "before" change nothing that anybody notices (common practice, no source). */
const LEAST_CHANGE = 0.05;

/**
 * Compares moves of the same kind before and after.
 *
 * Each move after the change is matched with the kind (distance, direction, duration) that it shares with at least
 * one move before; peak and RMS error are divided by the median of their kind before, so that kinds pool. Whether the
 * two samples differ is judged by the Wilcoxon–Mann–Whitney rank test (normal approximation with ties corrected;
 * Wilcoxon 1945, Mann & Whitney 1947), by how much by `shiftBetween`, of errors in their logarithms.
 */
export function compareMoves(
  before: readonly RecordedMove[],
  after: readonly RecordedMove[],
  startedAt: Date,
): TrialResult {
  const pairs = sameKind(before, after);
  const base: TrialResult = {
    startedAt: startedAt.toISOString(),
    moves: { before: pairs.before.length, after: pairs.after.length },
    peakFollowingError: null,
    rmsFollowingError: null,
    saturatedPct: null,
    verdict: 'waiting',
    sentence: `Waiting for moves of the same kind: ${pairs.after.length} of ${LEAST_MOVES} after the change, ${pairs.before.length} of ${LEAST_MOVES} before it.`,
  };
  if (pairs.before.length < LEAST_MOVES || pairs.after.length < LEAST_MOVES) return base;
  const compare = (figure: (move: RecordedMove) => number, relative: boolean): ComparedFigure => {
    const scaled = (moves: Matched[]): number[] =>
      moves.map(({ move, kind }) => figure(move) / (relative ? median(kind.map(figure)) || 1 : 1));
    const a = scaled(pairs.before);
    const b = scaled(pairs.after);
    const { pGreater, pLess } = rankTest(a, b);
    // Medians in the unit of the figure; another mix of kinds after the change must not show as a difference.
    const shown = median(pairs.before.map(({ move }) => figure(move)));
    return {
      before: shown,
      after:
        relative && median(a) > 0
          ? (shown * median(b)) / median(a)
          : median(pairs.after.map(({ move }) => figure(move))),
      pWorse: pGreater,
      pBetter: pLess,
      ...(relative ? inPerCent(a, b) : { change: shiftBetween(a, b) }),
    };
  };
  const peak = compare((move) => move.peakError, true);
  const rms = compare((move) => move.rmsError, true);
  const saturated = compare((move) => move.saturatedPct, false);
  const changed = Math.abs(peak.after / peak.before - 1) >= LEAST_CHANGE;
  const worse =
    (changed && peak.after > peak.before && peak.pWorse < LEVEL) ||
    (saturated.pWorse < LEVEL && saturated.after > saturated.before + 1);
  const better = changed && peak.after < peak.before && peak.pBetter < LEVEL;
  const verdict = worse ? 'worse' : better ? 'better' : 'no different';
  const range = peak.change
    ? ` (${signed(peak.change.value)} %, with 95 % confidence between ${signed(peak.change.low)} and ${signed(peak.change.high)} %)`
    : '';
  const mm = (value: number): string => (value < 0.1 ? value.toFixed(3) : value.toFixed(2));
  return {
    ...base,
    peakFollowingError: peak,
    rmsFollowingError: rms,
    saturatedPct: saturated,
    verdict,
    sentence: `Median peak following error of the same moves ${mm(peak.before)} → ${mm(peak.after)} mm${range} over ${pairs.before.length} moves before and ${pairs.after.length} after: ${verdict}.`,
  };
}

interface Matched {
  move: RecordedMove;
  /** The moves before the change that are of the same kind. */
  kind: RecordedMove[];
}

function sameKind(
  before: readonly RecordedMove[],
  after: readonly RecordedMove[],
): { before: Matched[]; after: Matched[] } {
  const alike = (a: RecordedMove, b: RecordedMove): boolean =>
    Math.sign(a.distance) === Math.sign(b.distance) &&
    close(Math.abs(a.distance), Math.abs(b.distance)) &&
    close(a.duration, b.duration);
  const matchedAfter = after
    .map((move) => ({ move, kind: before.filter((other) => alike(move, other)) }))
    .filter(({ kind }) => kind.length > 0);
  const matchedBefore = before
    .map((move) => ({ move, kind: before.filter((other) => alike(move, other)) }))
    .filter(({ move }) => after.some((other) => alike(move, other)));
  return { before: matchedBefore, after: matchedAfter };
}

const close = (a: number, b: number): boolean => Math.abs(a - b) <= KIND_TOLERANCE * Math.max(a, b);

const signed = (percent: number): string =>
  `${percent < -0.5 ? '−' : percent >= 0.5 ? '+' : ''}${Math.abs(percent).toFixed(0)}`;

/** The shift of logarithms as a change in %; none where a value is 0. */
function inPerCent(a: readonly number[], b: readonly number[]): { change?: Interval } {
  if ([...a, ...b].some((value) => !(value > 0))) return {};
  const { value, low, high } = shiftBetween(a.map(Math.log), b.map(Math.log));
  const percent = (ln: number): number => 100 * Math.expm1(ln);
  return { change: { value: percent(value), low: percent(low), high: percent(high) } };
}
