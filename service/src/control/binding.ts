import type { LimitName } from './limits.js';
import type { Recommendation } from './recommendation.js';

/** What binds: the allowed interval of λ, every limit's own bound, and the λ that follows. */
export interface Binding {
  /** λ of the gains that follow, rad/s; null where there are none. */
  lambda: number | null;
  commissionedLambda: number;
  /** Whether the commissioned λ is kept. */
  kept: boolean;
  upper: { name: LimitName; lambda: number } | null;
  lower: { name: LimitName; lambda: number } | null;
  allowed: { low: number; high: number } | null;
  limits: BindingLimit[];
  searched: { low: number; high: number };
  reason: string;
  waysOut: string[];
}

export interface BindingLimit {
  name: LimitName;
  side: 'upper' | 'lower';
  /** rad/s; null when it does not bind within the searched range. */
  lambda: number | null;
  /** How far the commissioned λ is inside, as a ratio above 1; null without a bound. */
  margin: number | null;
  /** The quantity at the commissioned λ, worst of the region; null where the loop is not stable. */
  value: number | null;
  threshold: number;
  unit: string;
}

/** A recommendation as what binds. */
export function bindingOf({ limits, lambda, verdict, reason, waysOut }: Recommendation): Binding {
  const bound = (name: LimitName | null): { name: LimitName; lambda: number } | null => {
    const found = limits.limits.find((limit) => limit.name === name);
    return found && found.bound !== null ? { name: found.name, lambda: found.bound } : null;
  };
  return {
    lambda,
    commissionedLambda: limits.lambda,
    kept: verdict === 'keep',
    upper: bound(limits.binding.upper),
    lower: bound(limits.binding.lower),
    allowed: limits.allowed,
    limits: limits.limits.map(({ name, side, bound: at, margin, value, threshold, unit }) => ({
      name,
      side,
      lambda: at,
      margin,
      value: Number.isFinite(value) ? value : null,
      threshold,
      unit,
    })),
    searched: limits.searched,
    reason,
    waysOut,
  };
}
