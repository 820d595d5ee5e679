/**
 * What identification knows beforehand and what it answers.
 *
 * Units throughout: position mm, time s, output % of full scale, gain K (mm/s)/%, pole α rad/s,
 * Coulomb friction f and bias b in % of output, dead time τ in s.
 */

/** What is known of an axis before its moves are looked at: commissioning values and the sampling. */
export interface PlantPrior {
  /** K, (mm/s)/%. Used for scale only, never as evidence. */
  readonly gain: number;
  /** α, rad/s. Chooses the filters. */
  readonly pole: number;
  /** T, s. */
  readonly sampleTime: number;
  /** Position resolution q, mm. */
  readonly resolution: number;
  /** First guess of the dead time τ, s (0 when not given); it is estimated in any case. */
  readonly deadTime?: number;
}

/** An estimate with the bounds of its 95 % interval. */
export interface Interval {
  readonly value: number;
  readonly low: number;
  readonly high: number;
}

/** Covariance of (ln K, ln α). */
export interface LnCovariance {
  readonly gain: number;
  readonly cross: number;
  readonly pole: number;
}

/** One window of ordinary production, estimated from its own samples alone. */
export interface WindowEstimate {
  /** Motion that the window holds, s. */
  readonly movingSeconds: number;
  /** Stream time from the window's first to its last sample, s. */
  readonly elapsedSeconds: number;
  readonly lnGain: number;
  readonly lnPole: number;
  readonly covariance: LnCovariance;
  /** f, %. */
  readonly coulomb: number;
  /** b, %. */
  readonly bias: number;
  /** K of each direction of travel; null when the window holds too little of one direction. */
  readonly gainForward: number | null;
  readonly gainReverse: number | null;
  /** Share of the moving time with the output at its limit, 0 … 1. */
  readonly outputLimitShare: number;
}

export type Verdict = 'usable' | 'doubtful' | 'unidentifiable';

/** The plant as the data show it. */
export interface PlantEstimate {
  readonly gain: Interval;
  readonly pole: Interval;
  /** Only where the data show that the two directions differ. */
  readonly gainForward?: Interval;
  readonly gainReverse?: Interval;
  readonly coulomb: Interval;
  readonly bias: Interval;
  /** τ, s. */
  readonly deadTime: number;
  readonly lnCovariance: LnCovariance;
  /** 100·(1 − ‖v − v̂‖/‖v − v̄‖) of the simulated velocity. */
  readonly fitPct: number;
  readonly movingSeconds: number;
  readonly verdict: Verdict;
  /** Plain sentences: what the data cannot say, and what is peculiar. */
  readonly remarks: readonly string[];
}
