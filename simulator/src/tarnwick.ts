import type { TarnwickAxis } from './tarnwick/tarnwick-axis.js';
import type { ScheduledFault } from './faults.js';
import { KILN_YARD_1 } from './tarnwick/kiln-yard-1.js';
import { TILE_HALL_1 } from './tarnwick/tile-hall-1.js';
import { TILE_HALL_2 } from './tarnwick/tile-hall-2.js';

export const TARNWICK_SITES = [
  { name: 'Tile Hall', timeZone: 'Europe/London' },
  { name: 'Kiln Yard', timeZone: 'Europe/London' },
] as const;

export const TARNWICK_GATEWAYS = [
  { name: 'tile-hall-1', site: 'Tile Hall' },
  { name: 'tile-hall-2', site: 'Tile Hall' },
  { name: 'kiln-yard-1', site: 'Kiln Yard' },
] as const;

/** What goes wrong at Tarnwick by itself, s after the start; every other axis stays sound. */
export const TARNWICK_SCHEDULE: readonly ScheduledFault[] = [
  { tag: 'CU-03 feed', at: 30, kind: 'speed-up', amount: 1, rampSeconds: 0 },
  { tag: 'GA-01 traverse', at: 50, kind: 'load', amount: 0.6, rampSeconds: 10 },
  { tag: 'ST-01 lift', at: 70, kind: 'derivative-gain', amount: 5, rampSeconds: 0 },
  { tag: 'GL-02 carriage', at: 80, kind: 'dry-friction', amount: 2, rampSeconds: 20 },
  { tag: 'PR-01 ram', at: 100, kind: 'supply-pressure', amount: -0.3, rampSeconds: 20 },
  { tag: 'GA-02 lift', at: 120, kind: 'silence', amount: 1, rampSeconds: 0 },
];

/** Every axis of Tarnwick Tileworks. All of it is invented. */
export const TARNWICK_AXES: readonly TarnwickAxis[] = [...TILE_HALL_1, ...TILE_HALL_2, ...KILN_YARD_1];
