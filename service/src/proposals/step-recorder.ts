import { Injectable } from '@nestjs/common';
import type { EntityManager } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { Proposal, ProposalEvent, ProposalVersion } from './proposal.entity.js';

/** Writes a step of a proposal's life down twice, in the transaction of the step: on the proposal and in the record. */
@Injectable()
export class StepRecorder {
  constructor(private readonly audit: AuditService) {}

  /**
   * @param user null when the service itself acted
   * @param further what the record is to keep beside state, version and gains
   */
  async note(
    manager: EntityManager,
    proposal: Proposal,
    action: string,
    note: string | null,
    user: SignedInUser | null,
    further: Record<string, unknown> = {},
    before?: Record<string, unknown>,
  ): Promise<ProposalEvent> {
    const event = await manager.save(ProposalEvent, {
      proposalId: proposal.id,
      at: new Date(),
      by: user?.name ?? 'service',
      action,
      note,
      version: proposal.version,
    });
    if (MAKES_VERSION.includes(action)) {
      const { at, by, version } = event;
      await manager.save(ProposalVersion, {
        proposalId: proposal.id,
        version,
        at,
        by,
        proposed: proposal.proposed,
        note,
      });
    }
    await this.audit.record(manager, {
      user,
      action: `proposal.${action.replaceAll(' ', '-')}`,
      subject: { type: 'proposal', id: proposal.id },
      siteId: proposal.siteId,
      note,
      ...(before && { before }),
      after: { ...stateOf(proposal), ...further },
    });
    return event;
  }
}

/** Actions that make a version. */
const MAKES_VERSION = ['drafted', 'newer evidence', 'altered'];

/** What the record keeps of a proposal at each step. */
export const stateOf = (proposal: Proposal): Record<string, unknown> => ({
  state: proposal.state,
  version: proposal.version,
  revision: proposal.revision,
  window:
    proposal.windowFrom && proposal.windowTo
      ? { from: proposal.windowFrom, to: proposal.windowTo }
      : undefined,
  proposed: proposal.proposed,
});
