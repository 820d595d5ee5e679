import type { Action } from '../auth/policy.js';
import type { ProposalState } from './proposal.entity.js';

export const STEPS = [
  'alter',
  'submit',
  'approve',
  'decline',
  'withdraw',
  'schedule',
  'apply',
  'keep',
  'roll-back',
] as const;
/** What a person can do with a proposal. */
export type Step = (typeof STEPS)[number];

/** In which states a step is allowed, which right it takes, and where it leads at once. */
export const STEP: Record<Step, { from: readonly ProposalState[]; right: Action; to: ProposalState | null }> =
  {
    // An alteration makes a new version: whatever was sent or approved before is a draft again.
    alter: { from: ['drafted', 'in review', 'approved', 'scheduled'], right: 'proposal.work', to: 'drafted' },
    submit: { from: ['drafted'], right: 'proposal.work', to: 'in review' },
    approve: { from: ['in review'], right: 'proposal.approve', to: 'approved' },
    decline: { from: ['in review'], right: 'proposal.approve', to: 'declined' },
    withdraw: {
      from: ['drafted', 'in review', 'approved', 'scheduled'],
      right: 'proposal.work',
      to: 'withdrawn',
    },
    schedule: { from: ['approved', 'scheduled'], right: 'proposal.schedule', to: 'scheduled' },
    apply: { from: ['scheduled'], right: 'proposal.apply', to: 'applying' },
    keep: { from: ['on trial'], right: 'proposal.keep', to: 'kept' },
    'roll-back': { from: ['on trial'], right: 'proposal.roll-back', to: 'applying' },
  };

/** What a roll-back is called on the proposal while the former gains are on their way. */
export const ASKED_BACK = 'roll-back asked for';

/** What a contribution to the discussion is called on the proposal. */
export const SAID = 'said';
