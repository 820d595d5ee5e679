import type { Physics } from './physics.js';

export const FAULT_KINDS = [
  'load',
  'viscous-drag',
  'dry-friction',
  'supply-pressure',
  'null-shift',
  'one-direction',
  'derivative-gain',
  'coarse-resolution',
  'speed-up',
  'silence',
  'read-back',
  'restless',
] as const;
export type FaultKind = (typeof FAULT_KINDS)[number];

/** What a fault's amount means and which amounts make sense. */
export interface FaultRule {
  meaning: string;
  min: number;
  max: number;
  usual: number;
  /** Whether it can come on slowly. */
  ramps: boolean;
}

export const FAULT: Record<FaultKind, FaultRule> = {
  load: { meaning: 'change of M as a share of it', min: -0.9, max: 10, usual: 0.6, ramps: true },
  'viscous-drag': { meaning: 'change of B as a share of it', min: -0.9, max: 10, usual: 0.5, ramps: true },
  'dry-friction': { meaning: 'change of F as a share of it', min: -1, max: 30, usual: 2, ramps: true },
  'supply-pressure': {
    meaning: 'change of g as a share of it',
    min: -0.95,
    max: 2,
    usual: -0.3,
    ramps: true,
  },
  'null-shift': { meaning: 'change of o, in % of output', min: -40, max: 40, usual: 3, ramps: true },
  'one-direction': {
    meaning: 'change of g for forward travel as a share of it',
    min: -0.95,
    max: 2,
    usual: -0.3,
    ramps: true,
  },
  'derivative-gain': {
    meaning: 'change of Kd at the machine as a share of it',
    min: -1,
    max: 30,
    usual: 4,
    ramps: false,
  },
  'coarse-resolution': {
    meaning: 'counts of the encoder that now come as one',
    min: 2,
    max: 1000,
    usual: 20,
    ramps: false,
  },
  'speed-up': {
    meaning: 'change of the programmed speeds as a share of them',
    min: -0.8,
    max: 3,
    usual: 0.5,
    ramps: false,
  },
  silence: { meaning: 'no samples are sent; the amount is not used', min: 0, max: 1, usual: 1, ramps: false },
  'read-back': {
    meaning: 'change of the Kd that is read back, as a share of it',
    min: -1,
    max: 1,
    usual: 0.01,
    ramps: false,
  },
  restless: {
    meaning: 'amplitude in mm of the motion that never ends while the axis is held',
    min: 0.001,
    max: 20,
    usual: 2,
    ramps: false,
  },
};

export interface Fault {
  kind: FaultKind;
  amount: number;
  /** Time from nothing to the full amount, s; 0 is a step. */
  rampSeconds: number;
}

/** A fault on an axis, since an axis time in s. */
export interface ActiveFault extends Fault {
  since: number;
}

/** A fault that comes by itself, s after the axis has started. */
export interface ScheduledFault extends Fault {
  tag: string;
  at: number;
}

/** Share of its amount that a fault has reached. */
export function reached({ since, rampSeconds }: ActiveFault, time: number): number {
  return rampSeconds > 0 ? Math.min(Math.max((time - since) / rampSeconds, 0), 1) : 1;
}

/** The machine with its faults at an axis time, s; faults of the same kind add up. */
export function physicsWith(sound: Physics, faults: readonly ActiveFault[], time: number): Physics {
  const physics = { ...sound };
  const onePercent = (sound.forceForward + sound.forceReverse) / 2;
  for (const fault of faults) {
    const amount = fault.amount * reached(fault, time);
    if (fault.kind === 'load') physics.mass += amount * sound.mass;
    else if (fault.kind === 'viscous-drag') physics.viscous += amount * sound.viscous;
    else if (fault.kind === 'dry-friction') physics.coulomb += amount * sound.coulomb;
    else if (fault.kind === 'null-shift') physics.offset += amount * onePercent;
    else if (fault.kind === 'one-direction') physics.forceForward *= 1 + amount;
    else if (fault.kind === 'supply-pressure') {
      physics.forceForward *= 1 + amount;
      physics.forceReverse *= 1 + amount;
    }
  }
  return physics;
}

/** Kinds whose amounts add up: two that are possible each can together leave less than no mass or friction. */
const ADDING: readonly FaultKind[] = ['load', 'viscous-drag', 'dry-friction', 'null-shift'];

/** Why a fault cannot come on top of those of its kind that are there; null when it can. */
export function beyondTogether(present: readonly Fault[], { kind, amount }: Fault): string | null {
  if (!ADDING.includes(kind)) return null;
  const { min, max } = FAULT[kind];
  const sum = present.reduce((total, fault) => (fault.kind === kind ? total + fault.amount : total), amount);
  if (sum >= min && sum <= max) return null;
  return `amount makes ${sum} with the ${kind} already there; together they must be from ${min} to ${max}`;
}

/** A fault as somebody asks for it, checked. */
export function checkedFault(kind: unknown, amount: unknown, rampSeconds: unknown): Fault | string[] {
  const problems: string[] = [];
  if (typeof kind !== 'string' || !(FAULT_KINDS as readonly string[]).includes(kind))
    return [`kind must be one of ${FAULT_KINDS.join(', ')}`];
  const rule = FAULT[kind as FaultKind];
  if (amount !== undefined && (typeof amount !== 'number' || !(amount >= rule.min && amount <= rule.max)))
    problems.push(`amount must be a number from ${rule.min} to ${rule.max} for ${kind} (${rule.meaning})`);
  if (kind === 'coarse-resolution' && typeof amount === 'number' && !Number.isInteger(amount))
    problems.push('amount must be a whole number for coarse-resolution');
  if (
    rampSeconds !== undefined &&
    (typeof rampSeconds !== 'number' || !(rampSeconds >= 0 && rampSeconds <= 86_400))
  )
    problems.push('rampSeconds must be a number from 0 to 86400');
  else if (rampSeconds && !rule.ramps)
    problems.push(`rampSeconds must be absent or 0: ${kind} comes at once`);
  if (problems.length > 0) return problems;
  return {
    kind: kind as FaultKind,
    amount: (amount as number | undefined) ?? rule.usual,
    rampSeconds: (rampSeconds as number | undefined) ?? 0,
  };
}
