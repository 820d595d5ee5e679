import type { FrameBlock } from './frame-codec.js';

/**
 * How far ahead of the service's clock a sample's time may be, µs: 5 min, the clock skew that Kerberos recommends to
 * allow (RFC 4120, 3.1.3 and 8.2). An axis takes no sample that is not later than its last one, so what lies further
 * ahead would silence it for that long.
 */
export const MAX_AHEAD_US = 300e6;

/**
 * Largest step of a sequence that is taken at once. A larger one is taken when the gateway sends the same message
 * again: a gateway that lost messages repeats it, a spoilt number comes only once. Otherwise every message up to a
 * spoilt number would count as a duplicate, and `durable` would tell the gateway to forget messages never taken.
 */
export const MAX_JUMP = 1_000;

/** Why a well-formed message is not taken; the reason is a stable word for counters. */
export class Refusal extends Error {
  constructor(
    readonly reason: RefusalReason,
    message: string,
  ) {
    super(message);
    this.name = 'Refusal';
  }
}

export type RefusalReason = 'unknown-axis' | 'wrong-sample-time' | 'time-ahead' | 'sequence-jump';

/**
 * @param nowUs the service's clock, µs since the Unix epoch
 * @throws Refusal `time-ahead` when the block ends more than MAX_AHEAD_US after it
 */
export function checkTime(block: FrameBlock, b: number, nowUs: number): void {
  const aheadUs = endOf(block) - nowUs;
  if (aheadUs > MAX_AHEAD_US)
    throw new Refusal(
      'time-ahead',
      `block ${b} ends ${(aheadUs / 1e6).toFixed(1)} s ahead of the service's clock, at most ${MAX_AHEAD_US / 1e6} s are taken`,
    );
}

/** Time of the last sample of a block, µs since the Unix epoch. */
export const endOf = ({ startUs, target, sampleTimeUs }: FrameBlock): number =>
  startUs + (target.length - 1) * sampleTimeUs;
