import type { ClosedSecond } from '../indicators/second-accumulator.js';

/** One second of a tile's strips: [s since 1970, peak following error mm, peak output %, % of moving time at the limit]. */
export const stripPoint = (second: ClosedSecond): [number, number, number, number] => [
  second.t,
  Math.max(second.peakMovingError, second.peakStandingError),
  second.peakOutput,
  second.movingSamples > 0 ? (100 * second.saturatedSamples) / second.movingSamples : 0,
];
