import type { AxisMake } from '../axis.js';
import type { Structure } from '../controller.js';

/** An axis as its drawings, its program and its commissioning sheet describe it. */
export interface TarnwickAxis extends AxisMake {
  name: string;
  machine: string;
  gateway: string;
  actuator: 'electric' | 'hydraulic';
  structure: Structure;
  /** Triple real pole that the gains were placed for, rad/s. */
  lambda: number;
  feedForward: boolean;
  /**
   * What the commissioning identification found, so a percent or so beside the truth: K (mm/s)/%, α rad/s, f and b
   * in %. Where K differs by direction, `gain` is the mean of both.
   */
  baseline: {
    gain: number;
    pole: number;
    coulomb: number;
    bias: number;
    gainForward?: number;
    gainReverse?: number;
  };
  /** mm; % of the baseline; % of moving time. */
  tolerances: { followingError: number; gainPct: number; polePct: number; saturatedPct: number };
  /** Its largest move: mm, s. */
  move: { distance: number; duration: number };
}
