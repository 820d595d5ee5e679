/**
 * One-second indicators of an axis, made from its raw samples.
 *
 * Time is the samples' own. A second closes when a sample of a later second arrives; a second with missing samples
 * is closed with the samples that it got.
 */

/** What an axis did in one second; see `indicator-rollup.entity.ts` for the units. */
export interface ClosedSecond {
  /** Start, s since the Unix epoch. */
  t: number;
  samples: number;
  movingSamples: number;
  peakMovingError: number;
  sumSquaredMovingError: number;
  peakStandingError: number;
  sumSquaredStandingError: number;
  saturatedSamples: number;
  peakOutput: number;
  sumSquaredOutput: number;
  sumSquaredActivity: number;
  activityCrossings: number;
  coveredSeconds: number;
  gaps: number;
}

export interface IndicatorSettings {
  /** T, s */
  sampleTime: number;
  /** mm per count */
  resolution: number;
  /** Frequency scale of the closed loop, rad/s: output above three times this is counted as activity. */
  loopFrequency: number;
}

/** Output from this magnitude on counts as being at its limit, in 0.01 %. */
const AT_LIMIT = 9_990;
/** An axis moves while its target changed within this time, s. */
const TARGET_HOLD = 0.05;
/** Velocity is smoothed over this time, s, and counts as motion from MOTION_COUNTS per that time. */
const VELOCITY_TIME = 0.02;
const MOTION_COUNTS = 4;
const TENTHS = 10;

// Layout of the state: everything the accumulator knows, so that saving it is copying it.
const SECOND = 0; // index of the open second, or -1
const SAMPLES = 1;
const MOVING = 2;
const PEAK_MOVING = 3; // counts
const SQUARE_MOVING = 4; // counts²
const PEAK_STANDING = 5;
const SQUARE_STANDING = 6;
const SATURATED = 7;
const PEAK_OUTPUT = 8; // 0.01 %
const SQUARE_OUTPUT = 9;
const CROSSINGS = 10;
const GAPS = 11;
const LAST_TARGET = 12;
const LAST_POSITION = 13;
const SINCE_TARGET = 14; // samples since the target changed
const VELOCITY = 15; // counts per sample, smoothed
const LOW_1 = 16; // low-passed output, 0.01 %
const LOW_2 = 17;
const LAST_HIGH_SIGN = 18;
const STARTED = 19; // 0 until the first sample after a gap
const TENTH_SQUARES = 20;
const TENTH_SAMPLES = TENTH_SQUARES + TENTHS;
const STATE_LENGTH = TENTH_SAMPLES + TENTHS;

/**
 * Accumulates samples into seconds.
 *
 * - moving: the target changed within 50 ms, or the position, smoothed over 20 ms, travels more than four counts
 *   in that time (so the end of a step counts and encoder noise does not);
 * - following error: target − position, mm, moving and standing apart;
 * - saturated: |u| ≥ 99.9 % while moving;
 * - output activity: u behind two first-order high-passes at three times the loop's frequency (at most a quarter of
 *   the Nyquist frequency). Its mean square is the median over the tenths of the second, so that the corners of a
 *   move profile do not count as hum.
 */
export class SecondAccumulator {
  readonly state = new Float64Array(STATE_LENGTH);
  private readonly holdSamples: number;
  private readonly velocityWeight: number;
  private readonly motionVelocity: number;
  private readonly lowWeight: number;

  constructor(private readonly settings: IndicatorSettings) {
    const { sampleTime, loopFrequency } = settings;
    this.holdSamples = Math.round(TARGET_HOLD / sampleTime);
    this.velocityWeight = 1 - Math.exp(-sampleTime / VELOCITY_TIME);
    this.motionVelocity = (MOTION_COUNTS * sampleTime) / VELOCITY_TIME;
    const cutoff = Math.min(3 * loopFrequency, Math.PI / sampleTime / 4);
    this.lowWeight = 1 - Math.exp(-cutoff * sampleTime);
    this.state[SECOND] = -1;
  }

  /** Says that samples are missing before the next one: counted, and nothing is carried across. */
  gap(): void {
    this.state[GAPS]!++;
    this.state[STARTED] = 0;
  }

  /**
   * Takes samples in the order of their time.
   *
   * @param target counts
   * @param position counts
   * @param output 0.01 %
   * @param startUs time of sample 0, µs since the Unix epoch
   * @param stepUs sample time, µs
   * @param from first sample to take
   * @param close called with each second that ended
   */
  push(
    target: Int32Array,
    position: Int32Array,
    output: Int16Array,
    startUs: number,
    stepUs: number,
    from: number,
    close: (second: ClosedSecond) => void,
  ): void {
    const { state } = this;
    let i = from;
    while (i < target.length) {
      const second = Math.floor((startUs + i * stepUs) / 1e6);
      if (second !== state[SECOND]) {
        if (state[SECOND]! >= 0) close(this.closeSecond());
        state[SECOND] = second;
      }
      const to = Math.min(target.length, Math.ceil(((second + 1) * 1e6 - startUs) / stepUs));
      this.accumulate(target, position, output, startUs, stepUs, i, to);
      i = to;
    }
  }

  /** Takes samples `from` … `to` − 1, all of the open second. */
  private accumulate(
    target: Int32Array,
    position: Int32Array,
    output: Int16Array,
    startUs: number,
    stepUs: number,
    from: number,
    to: number,
  ): void {
    const { state, holdSamples, velocityWeight, motionVelocity, lowWeight } = this;
    if (state[STARTED] === 0) {
      state[STARTED] = 1;
      state[LAST_TARGET] = target[from]!;
      state[LAST_POSITION] = position[from]!;
      state[SINCE_TARGET] = holdSamples + 1;
      state[VELOCITY] = 0;
      state[LOW_1] = output[from]!;
      state[LOW_2] = 0;
      state[LAST_HIGH_SIGN] = 0;
    }
    let lastTarget = state[LAST_TARGET]!;
    let lastPosition = state[LAST_POSITION]!;
    let sinceTarget = state[SINCE_TARGET]!;
    let velocity = state[VELOCITY]!;
    let low1 = state[LOW_1]!;
    let low2 = state[LOW_2]!;
    let highSign = state[LAST_HIGH_SIGN]!;
    let moving = 0;
    let peakMoving = state[PEAK_MOVING]!;
    let squareMoving = state[SQUARE_MOVING]!;
    let peakStanding = state[PEAK_STANDING]!;
    let squareStanding = state[SQUARE_STANDING]!;
    let saturated = 0;
    let peakOutput = state[PEAK_OUTPUT]!;
    let squareOutput = state[SQUARE_OUTPUT]!;
    let crossings = 0;
    // The tenth changes at whole samples: no division per sample.
    const secondStart = state[SECOND]! * 1e6;
    let tenth = Math.min(TENTHS - 1, Math.floor((startUs + from * stepUs - secondStart) / 1e5));
    let tenthEnd = tenthEndsAt(tenth, secondStart - startUs, stepUs, to);
    let tenthSquares = state[TENTH_SQUARES + tenth]!;
    let tenthSamples = state[TENTH_SAMPLES + tenth]!;
    for (let i = from; i < to; i++) {
      if (i >= tenthEnd) {
        state[TENTH_SQUARES + tenth] = tenthSquares;
        state[TENTH_SAMPLES + tenth] = tenthSamples;
        tenth = Math.min(TENTHS - 1, Math.floor((startUs + i * stepUs - secondStart) / 1e5));
        tenthEnd = tenthEndsAt(tenth, secondStart - startUs, stepUs, to);
        tenthSquares = state[TENTH_SQUARES + tenth]!;
        tenthSamples = state[TENTH_SAMPLES + tenth]!;
      }
      const r = target[i]!;
      const y = position[i]!;
      const u = output[i]!;
      sinceTarget = r === lastTarget ? sinceTarget + 1 : 0;
      velocity += velocityWeight * (y - lastPosition - velocity);
      lastTarget = r;
      lastPosition = y;
      const error = Math.abs(r - y);
      const magnitude = Math.abs(u);
      if (sinceTarget <= holdSamples || Math.abs(velocity) > motionVelocity) {
        moving++;
        if (error > peakMoving) peakMoving = error;
        squareMoving += error * error;
        if (magnitude >= AT_LIMIT) saturated++;
      } else {
        if (error > peakStanding) peakStanding = error;
        squareStanding += error * error;
      }
      if (magnitude > peakOutput) peakOutput = magnitude;
      squareOutput += u * u;
      low1 += lowWeight * (u - low1);
      const high1 = u - low1;
      low2 += lowWeight * (high1 - low2);
      const high = high1 - low2;
      const sign = high > 0 ? 1 : -1;
      if (sign !== highSign) crossings++;
      highSign = sign;
      tenthSquares += high * high;
      tenthSamples++;
    }
    state[TENTH_SQUARES + tenth] = tenthSquares;
    state[TENTH_SAMPLES + tenth] = tenthSamples;
    state[SAMPLES]! += to - from;
    state[MOVING]! += moving;
    state[PEAK_MOVING] = peakMoving;
    state[SQUARE_MOVING] = squareMoving;
    state[PEAK_STANDING] = peakStanding;
    state[SQUARE_STANDING] = squareStanding;
    state[SATURATED]! += saturated;
    state[PEAK_OUTPUT] = peakOutput;
    state[SQUARE_OUTPUT] = squareOutput;
    state[CROSSINGS]! += crossings;
    state[LAST_TARGET] = lastTarget;
    state[LAST_POSITION] = lastPosition;
    state[SINCE_TARGET] = sinceTarget;
    state[VELOCITY] = velocity;
    state[LOW_1] = low1;
    state[LOW_2] = low2;
    state[LAST_HIGH_SIGN] = highSign;
  }

  private closeSecond(): ClosedSecond {
    const { state } = this;
    const q = this.settings.resolution;
    const samples = state[SAMPLES]!;
    const second: ClosedSecond = {
      t: state[SECOND]!,
      samples,
      movingSamples: state[MOVING]!,
      peakMovingError: q * state[PEAK_MOVING]!,
      sumSquaredMovingError: q * q * state[SQUARE_MOVING]!,
      peakStandingError: q * state[PEAK_STANDING]!,
      sumSquaredStandingError: q * q * state[SQUARE_STANDING]!,
      saturatedSamples: state[SATURATED]!,
      peakOutput: state[PEAK_OUTPUT]! / 100,
      sumSquaredOutput: state[SQUARE_OUTPUT]! / 1e4,
      sumSquaredActivity: (medianTenth(state) * samples) / 1e4,
      activityCrossings: state[CROSSINGS]!,
      coveredSeconds: samples * this.settings.sampleTime,
      gaps: state[GAPS]!,
    };
    state.fill(0, SAMPLES, GAPS + 1);
    state.fill(0, TENTH_SQUARES, STATE_LENGTH);
    return second;
  }
}

/** First sample after a tenth of the second that starts `offsetUs` after sample 0; the last tenth takes all up to `to`. */
const tenthEndsAt = (tenth: number, offsetUs: number, stepUs: number, to: number): number =>
  tenth === TENTHS - 1 ? to : Math.ceil((offsetUs + (tenth + 1) * 1e5) / stepUs);

/** Median of the mean squares of those tenths that have samples. */
function medianTenth(state: Float64Array): number {
  const means: number[] = [];
  for (let k = 0; k < TENTHS; k++) {
    const count = state[TENTH_SAMPLES + k]!;
    if (count > 0) means.push(state[TENTH_SQUARES + k]! / count);
  }
  means.sort((a, b) => a - b);
  return means.length === 0 ? 0 : means[means.length >> 1]!;
}
