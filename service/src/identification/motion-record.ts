/**
 * A recorded stretch of an axis, and the parts of it that teach: windows of steady direction.
 */

/** Samples on a uniform grid. */
export interface MotionRecord {
  /** T, s. */
  readonly sampleTime: number;
  /** mm; NaN where the row is missing. */
  readonly position: Float64Array;
  /** %; NaN where the row is missing. `output[k]` is computed at sample k and acts from then on. */
  readonly output: Float64Array;
  /** mm. */
  readonly target?: Float64Array;
}

/** Samples `from` … `to` − 1, all of them with the axis surely moving in one direction. */
export interface MotionWindow {
  readonly from: number;
  readonly to: number;
  readonly direction: 1 | -1;
}

/** What can be said of a record before any plant is fitted. */
export interface Motion {
  readonly windows: readonly MotionWindow[];
  /** Output with holes of up to LONGEST_BRIDGE samples filled in between their neighbours. */
  readonly output: Float64Array;
  /** Velocity over `2·reach` samples, mm/s; NaN beside holes. */
  readonly velocity: Float64Array;
  readonly reach: number;
  /** Standard deviation of one position sample, mm: encoder noise and quantisation. */
  readonly noise: number;
  readonly missing: number;
}

/** Missing rows that are bridged, samples: the output hardly moves in between. */
const LONGEST_BRIDGE = 3;
/** Speed below which nothing is learned, as a share of the record's top speed: friction is no constant there. */
const SLOW_SHARE = 0.03;
/** Speed below which nothing is learned, in standard deviations of the velocity. */
const SURE_DEVIATIONS = 6;
/** Longest half-span of the velocity, samples and s. */
const LONGEST_REACH = 12;
const LONGEST_REACH_SECONDS = 0.02;
/** Measured samples that a window needs. */
const LEAST_SAMPLES = 10;

/**
 * Finds the windows of a record: stretches in which the velocity, averaged over 2·reach samples, stays beyond
 * SURE_DEVIATIONS of its own noise and SLOW_SHARE of the top speed with one sign, less `reach` samples at both
 * ends, so that every interval inside has that sign.
 */
export function motionOf(record: MotionRecord): Motion {
  const { sampleTime: T, position } = record;
  const n = position.length;
  const output = bridge(record.output);
  const noise = positionNoise(position);
  let reach = 2;
  let velocity = spanVelocity(position, reach, T);
  const top = topSpeed(velocity);
  const deviation = (r: number): number => noise / (Math.SQRT2 * r * T);
  while (
    SURE_DEVIATIONS * deviation(reach) > SLOW_SHARE * top &&
    reach < LONGEST_REACH &&
    (reach + 1) * T <= LONGEST_REACH_SECONDS
  )
    reach++;
  if (reach > 2) velocity = spanVelocity(position, reach, T);
  const least = Math.max(SURE_DEVIATIONS * deviation(reach), SLOW_SHARE * top, Number.MIN_VALUE);

  const windows: MotionWindow[] = [];
  let start = -1;
  let direction = 0;
  let measured = 0;
  const close = (end: number): void => {
    const from = start + reach;
    const to = end - reach;
    if (direction !== 0 && measured - 2 * reach >= LEAST_SAMPLES && to - from >= LEAST_SAMPLES)
      windows.push({ from, to, direction: direction as 1 | -1 });
    start = -1;
    direction = 0;
    measured = 0;
  };
  for (let k = 0; k < n; k++) {
    if (Number.isNaN(output[k]!)) {
      close(k);
      continue;
    }
    const v = velocity[k]!;
    // A hole in the positions says nothing against the direction on both its sides.
    const here = Number.isNaN(v) ? direction : v >= least ? 1 : v <= -least ? -1 : 0;
    if (here !== direction) {
      close(k);
      if (here !== 0) {
        start = k;
        direction = here;
      }
    }
    if (direction !== 0 && !Number.isNaN(position[k]!)) measured++;
  }
  close(n);
  let missing = 0;
  for (let k = 0; k < n; k++) if (Number.isNaN(position[k]!)) missing++;
  return { windows, output, velocity, reach, noise, missing };
}

/** Cuts windows longer than `seconds` into equal parts. */
export function cutWindows(
  windows: readonly MotionWindow[],
  sampleTime: number,
  seconds: number,
): MotionWindow[] {
  return windows.flatMap(({ from, to, direction }) => {
    const parts = Math.max(1, Math.ceil(((to - from) * sampleTime) / seconds));
    return Array.from({ length: parts }, (_, i) => ({
      from: from + Math.floor(((to - from) * i) / parts),
      to: from + Math.floor(((to - from) * (i + 1)) / parts),
      direction,
    }));
  });
}

function bridge(values: Float64Array): Float64Array {
  const filled = values.slice();
  let last = -1;
  for (let k = 0; k < filled.length; k++) {
    if (Number.isNaN(values[k]!)) continue;
    const hole = k - last - 1;
    if (last >= 0 && hole > 0 && hole <= LONGEST_BRIDGE)
      for (let i = 1; i <= hole; i++)
        filled[last + i] = values[last]! + ((values[k]! - values[last]!) * i) / (hole + 1);
    last = k;
  }
  return filled;
}

/** (y(k+reach) − y(k−reach))/(2·reach·T); NaN at the ends and beside holes. */
export function spanVelocity(position: Float64Array, reach: number, sampleTime: number): Float64Array {
  const n = position.length;
  const velocity = new Float64Array(n).fill(NaN);
  const rate = 1 / (2 * reach * sampleTime);
  for (let k = reach; k < n - reach; k++) velocity[k] = (position[k + reach]! - position[k - reach]!) * rate;
  return velocity;
}

/**
 * Standard deviation of a position sample from third differences, in which smooth motion vanishes:
 * Var(Δ³y) = 20·σ² for white noise; the median makes it robust (σ = 1.4826·MAD for a normal distribution).
 * Differences of zero are left out: an encoder that stands shows no noise and still rounds.
 */
function positionNoise(position: Float64Array): number {
  const differences: number[] = [];
  const stride = Math.max(1, Math.floor(position.length / 8_000));
  for (let k = 3; k < position.length; k += stride) {
    const third = Math.abs(position[k]! - 3 * position[k - 1]! + 3 * position[k - 2]! - position[k - 3]!);
    if (third > 1e-9) differences.push(third);
  }
  return differences.length > 0 ? (1.4826 * median(differences)) / Math.sqrt(20) : 0;
}

/** Speed that only one sample in a thousand exceeds, from some thousands of them. */
function topSpeed(velocity: Float64Array): number {
  const stride = Math.max(1, Math.floor(velocity.length / 8_000));
  const speeds = Float64Array.from({ length: Math.ceil(velocity.length / stride) }, (_, i) =>
    Math.abs(velocity[i * stride]!),
  )
    .filter((v) => !Number.isNaN(v))
    .sort();
  return speeds[Math.floor(0.999 * (speeds.length - 1))] ?? 0;
}

function median(values: number[]): number {
  const sorted = Float64Array.from(values).sort();
  return sorted[sorted.length >> 1]!;
}
