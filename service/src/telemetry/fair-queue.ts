/** What waits: it knows its size. */
export interface Sized {
  readonly bytes: number;
}

interface Lane<T> {
  readonly waiting: T[];
  /** Index of the first that still waits; what is before it has gone. */
  head: number;
  bytes: number;
  credit: number;
}

export interface QueueBounds {
  /** Bytes that one lane may hold. */
  laneBytes: number;
  /** Bytes of all lanes beyond which a lane may hold no more than one item. */
  totalBytes: number;
  /** Bytes that a lane may take out in one round. */
  quantum: number;
}

/** Counted beside an item's own bytes, so that many small ones are bounded too. */
const OVERHEAD_BYTES = 256;

/**
 * Bounded lanes served in turn, each by about the same number of bytes: deficit round robin (M. Shreedhar and
 * G. Varghese, "Efficient Fair Queueing Using Deficit Round Robin", SIGCOMM 1995). A lane that is flooded fills and
 * refuses; it takes nothing from the others' turns.
 */
export class FairQueue<T extends Sized> {
  private readonly lanes = new Map<number, Lane<T>>();
  /** Keys of lanes with something in them, in the order of their turns. */
  private turns: number[] = [];
  bytes = 0;
  size = 0;

  constructor(private readonly bounds: QueueBounds) {}

  /** @returns false when the lane is full; then the item was not taken */
  offer(key: number, item: T): boolean {
    const lane = this.lanes.get(key) ?? { waiting: [], head: 0, bytes: 0, credit: 0 };
    const bytes = item.bytes + OVERHEAD_BYTES;
    const { laneBytes, totalBytes } = this.bounds;
    const after = lane.bytes + bytes;
    if (lane.bytes > 0 && (after > laneBytes || this.bytes + bytes > totalBytes)) return false;
    if (lane.bytes === 0) {
      this.lanes.set(key, lane);
      this.turns.push(key);
    }
    lane.waiting.push(item);
    lane.bytes = after;
    this.bytes += bytes;
    this.size++;
    return true;
  }

  /** The item whose turn it is; null when nothing waits. */
  next(): T | null {
    for (;;) {
      const key = this.turns[0];
      if (key === undefined) return null;
      const lane = this.lanes.get(key)!;
      const bytes = lane.waiting[lane.head]!.bytes + OVERHEAD_BYTES;
      if (lane.credit >= bytes) {
        lane.credit -= bytes;
        return this.takeFrom(key, lane);
      }
      lane.credit += this.bounds.quantum;
      this.turns.push(this.turns.shift()!);
    }
  }

  /** The first of one lane, out of turn; null when nothing waits there. */
  nextOf(key: number): T | null {
    const lane = this.lanes.get(key);
    return lane ? this.takeFrom(key, lane) : null;
  }

  /** The first of one lane, left where it is. */
  firstOf(key: number): T | null {
    const lane = this.lanes.get(key);
    return lane?.waiting[lane.head] ?? null;
  }

  bytesOf(key: number): number {
    return this.lanes.get(key)?.bytes ?? 0;
  }

  private takeFrom(key: number, lane: Lane<T>): T {
    const item = lane.waiting[lane.head++]!;
    const bytes = item.bytes + OVERHEAD_BYTES;
    lane.bytes -= bytes;
    this.bytes -= bytes;
    this.size--;
    if (lane.head === lane.waiting.length) {
      // An empty lane keeps no credit: a burst later must not overtake the others.
      this.lanes.delete(key);
      this.turns = this.turns.filter((turn) => turn !== key);
    } else if (lane.head > 1_000) {
      lane.waiting.splice(0, lane.head);
      lane.head = 0;
    }
    return item;
  }
}
