/** One move of an axis: the target left rest and came to rest again. */
export interface RecordedMove {
  /** s since the Unix epoch */
  t: number;
  /** mm, signed */
  distance: number;
  /** s */
  duration: number;
  /** mm */
  peakError: number;
  /** mm */
  rmsError: number;
  /** % of the move's samples */
  saturatedPct: number;
}

/** A target that stands this long, s, has ended its move; until then the move settles. */
const STANDING = 0.15;
/** Moves shorter than this many counts are jogs, not production. */
const SHORTEST = 50;
/** Output from this magnitude on counts as being at its limit, in 0.01 %. */
const AT_LIMIT = 9_990;

const STARTED = 0;
const MOVING = 1;
const START_US = 2;
const START_TARGET = 3;
const LAST_TARGET = 4;
const LAST_CHANGE_US = 5;
const PEAK = 6;
const SQUARES = 7;
const SATURATED = 8;
const SAMPLES = 9;
const STATE_LENGTH = 10;

/** Cuts the stream into moves. A gap drops the move that it interrupts: half a move compares with nothing. */
export class MoveRecorder {
  readonly state = new Float64Array(STATE_LENGTH);

  /** @param resolution mm per count */
  constructor(private readonly resolution: number) {}

  gap(): void {
    this.state.fill(0);
  }

  /** Takes samples from `from` on; arguments as `SecondAccumulator.push`. */
  push(
    target: Int32Array,
    position: Int32Array,
    output: Int16Array,
    startUs: number,
    stepUs: number,
    from: number,
    close: (move: RecordedMove) => void,
  ): void {
    const { state } = this;
    if (state[STARTED] === 0 && from < target.length) {
      state[STARTED] = 1;
      state[LAST_TARGET] = target[from]!;
    }
    let moving = state[MOVING] === 1;
    let lastTarget = state[LAST_TARGET]!;
    let lastChangeUs = state[LAST_CHANGE_US]!;
    let peak = state[PEAK]!;
    let squares = state[SQUARES]!;
    let saturated = state[SATURATED]!;
    let samples = state[SAMPLES]!;
    for (let i = from; i < target.length; i++) {
      const r = target[i]!;
      const us = startUs + i * stepUs;
      if (r !== lastTarget) {
        if (!moving) {
          moving = true;
          state[START_US] = us - stepUs;
          state[START_TARGET] = lastTarget;
          peak = squares = saturated = samples = 0;
        }
        lastChangeUs = us;
        lastTarget = r;
      }
      if (!moving) continue;
      const error = Math.abs(r - position[i]!);
      if (error > peak) peak = error;
      squares += error * error;
      if (Math.abs(output[i]!) >= AT_LIMIT) saturated++;
      samples++;
      if (us - lastChangeUs < STANDING * 1e6) continue;
      moving = false;
      const counts = lastTarget - state[START_TARGET]!;
      if (Math.abs(counts) < SHORTEST) continue;
      close({
        t: state[START_US]! / 1e6,
        distance: counts * this.resolution,
        duration: (lastChangeUs - state[START_US]!) / 1e6,
        peakError: peak * this.resolution,
        rmsError: Math.sqrt(squares / samples) * this.resolution,
        saturatedPct: (100 * saturated) / samples,
      });
    }
    state[MOVING] = moving ? 1 : 0;
    state[LAST_TARGET] = lastTarget;
    state[LAST_CHANGE_US] = lastChangeUs;
    state[PEAK] = peak;
    state[SQUARES] = squares;
    state[SATURATED] = saturated;
    state[SAMPLES] = samples;
  }

  /** Whether the target stands: no move is under way. */
  get standing(): boolean {
    return this.state[MOVING] === 0;
  }
}
