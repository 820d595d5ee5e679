import type { Schemas } from '../api/client';

export type AxisState = Schemas['AxisDto']['state'];

export const STATE_WORDS: Record<AxisState, string> = {
  'in-tune': 'In tune',
  drifting: 'Drifting',
  'out-of-tune': 'Out of tune',
  'no-signal': 'No signal',
  'in-maintenance': 'In maintenance',
};

/** CSS colour of a state; In tune stays ink. */
export const STATE_COLOUR: Record<AxisState, string> = {
  'in-tune': 'var(--ink)',
  drifting: 'var(--drift)',
  'out-of-tune': 'var(--out)',
  'no-signal': 'var(--silent)',
  'in-maintenance': 'var(--held)',
};

/** Ground of a tile or card in a state. */
export const STATE_TINT: Record<AxisState, string> = {
  'in-tune': 'var(--surface)',
  drifting: 'var(--tint-drift)',
  'out-of-tune': 'var(--tint-out)',
  'no-signal': 'var(--surface)',
  'in-maintenance': 'var(--tint-held)',
};

/** Worst first, as the fleet is ordered and counted. */
export const STATES_WORST_FIRST: readonly AxisState[] = [
  'out-of-tune',
  'drifting',
  'no-signal',
  'in-maintenance',
  'in-tune',
];
