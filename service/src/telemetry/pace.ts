/** A message that waited longer than this, ms, shows that the service is behind. */
const BEHIND_MS = 500;
/** Waiting times below this, ms, for CALM_BEATS beats in a row show that it has caught up. */
const CALM_MS = 50;
const CALM_BEATS = 5;
/** First and longest time between messages that a gateway is asked for, ms. */
const FIRST_MS = 500;
const LONGEST_MS = 4_000;

/**
 * How far apart a gateway is asked to send, judged at a steady beat: doubled while its messages wait too long, halved
 * after five calm beats. Fewer and larger messages cost less each; no sample is left out. (Common practice, no source.)
 */
export class Pace {
  /** Time between messages that the gateway was asked for, ms; 0 when it may send as it likes. */
  keepEveryMs = 0;
  private calm = 0;

  /**
   * @param waitedMs longest wait of a message since the last beat, ms
   * @param refused whether a message was refused for lack of room since then
   * @returns whether the gateway must be told
   */
  beat(waitedMs: number, refused: boolean): boolean {
    const before = this.keepEveryMs;
    if (refused || waitedMs > BEHIND_MS) {
      this.calm = 0;
      this.keepEveryMs = Math.min(LONGEST_MS, Math.max(FIRST_MS, 2 * before));
    } else if (waitedMs > CALM_MS) this.calm = 0;
    else if (before > 0 && ++this.calm >= CALM_BEATS) {
      this.calm = 0;
      this.keepEveryMs = before > FIRST_MS ? before / 2 : 0;
    }
    return this.keepEveryMs !== before;
  }
}
