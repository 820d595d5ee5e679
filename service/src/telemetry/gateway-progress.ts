import type { Gateway } from '../fleet/gateway.entity.js';

/** Seconds that rates and clocks are looked at over. */
const SLOTS = 60;
/** Seconds that a rate is the mean of. */
const RATE_SECONDS = 10;

/** What was seen of a gateway's messages since the service started; a ring of the last minute for rates and clock. */
export class GatewayWatch {
  gaps = 0;
  duplicates = 0;
  /** Samples not taken because they were not later than what their axis had. */
  droppedSamples = 0;
  readonly refusals = new Map<string, number>();
  /** Time of the newest sample taken, µs since the Unix epoch; 0 before the first. */
  private newestUs = 0;
  private readonly second = new Float64Array(SLOTS).fill(-1);
  private readonly messages = new Float64Array(SLOTS);
  private readonly samples = new Float64Array(SLOTS);
  private readonly offset = new Float64Array(SLOTS);

  /** A message was taken at `nowMs`; `newestUs` is the time of its newest sample. */
  taken(nowMs: number, samples: number, newestUs: number): void {
    const slot = this.slotAt(nowMs);
    this.messages[slot]!++;
    this.samples[slot]! += samples;
    if (samples === 0) return;
    this.newestUs = newestUs;
    this.offset[slot] = Math.max(this.offset[slot]!, newestUs / 1e6 - nowMs / 1e3);
  }

  refused(reason: string): void {
    this.refusals.set(reason, (this.refusals.get(reason) ?? 0) + 1);
  }

  /** Messages and samples a second, over the last ten whole seconds. */
  rates(nowMs: number): { messages: number; samples: number } {
    const now = Math.floor(nowMs / 1000);
    const rates = { messages: 0, samples: 0 };
    for (let slot = 0; slot < SLOTS; slot++) {
      if (this.second[slot]! >= now || this.second[slot]! < now - RATE_SECONDS) continue;
      rates.messages += this.messages[slot]! / RATE_SECONDS;
      rates.samples += this.samples[slot]! / RATE_SECONDS;
    }
    return rates;
  }

  /**
   * The gateway's clock against the service's, s: the largest of (time of the newest sample − time of arrival) within
   * the last minute, so the least delayed message counts. Positive: the clock is ahead by at least that. Negative: the
   * samples come late by that, or the clock is behind; messages alone cannot tell the two apart. Null without messages.
   */
  clockOffset(nowMs: number): number | null {
    const now = Math.floor(nowMs / 1000);
    let best = -Infinity;
    for (let slot = 0; slot < SLOTS; slot++)
      if (this.second[slot]! > now - SLOTS) best = Math.max(best, this.offset[slot]!);
    return Number.isFinite(best) ? best : null;
  }

  /** How old the newest sample taken is, s; null before the first. */
  lag(nowMs: number): number | null {
    return this.newestUs > 0 ? nowMs / 1e3 - this.newestUs / 1e6 : null;
  }

  private slotAt(nowMs: number): number {
    const second = Math.floor(nowMs / 1000);
    const slot = second % SLOTS;
    if (this.second[slot] !== second) {
      this.second[slot] = second;
      this.messages[slot] = 0;
      this.samples[slot] = 0;
      this.offset[slot] = -Infinity;
    }
    return slot;
  }
}

/** How far a gateway has got; in memory it runs ahead of what is durable. */
export interface GatewayProgress {
  id: number;
  siteId: number;
  epoch: string | null;
  /** Last sequence taken. */
  received: number;
  durable: number;
  lastSeenAt: number | null;
  /** A sequence too far ahead to be taken at once; it is taken when it comes again. */
  jumpTo: number | null;
  readonly watch: GatewayWatch;
}

export const progressOf = (gateway: Gateway): GatewayProgress => ({
  id: gateway.id,
  siteId: gateway.siteId,
  epoch: gateway.epoch,
  received: gateway.durableSequence,
  durable: gateway.durableSequence,
  lastSeenAt: gateway.lastSeenAt?.getTime() ?? null,
  jumpTo: null,
  watch: new GatewayWatch(),
});
