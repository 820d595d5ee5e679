import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { saveFile } from '../../api/download';
import { queryClient } from '../../api/query-client';

export type Proposal = Schemas['ProposalDto'];
export type ProposalSummary = Schemas['ProposalSummaryDto'];
export type Step = Proposal['actions'][number];

export const proposalsQuery = (filter: { state?: 'open'; axisId?: number }) =>
  queryOptions({
    queryKey: ['proposals', filter],
    queryFn: () => answer(client.GET('/api/v1/proposals', { params: { query: { ...filter, limit: 200 } } })),
  });

export const proposalQuery = (id: number) =>
  queryOptions({
    queryKey: ['proposal', id],
    queryFn: () => answer(client.GET('/api/v1/proposals/{id}', { params: { path: { id } } })),
  });

/** What a step needs beside the proposal. */
export type StepInput =
  | { step: 'submit' | 'approve' | 'withdraw' | 'keep' }
  | { step: 'decline' | 'roll-back'; reason: string }
  | { step: 'schedule'; from: Date; to: Date }
  | { step: 'apply'; checklist: Record<string, boolean>; password: string };

/** Takes a step on the version that the person has seen. */
export async function takeStep({ id, version }: Proposal, input: StepInput): Promise<Proposal> {
  const params = { path: { id }, header: { 'if-match': String(version) } };
  const proposal = await answer(request());
  queryClient.setQueryData(['proposal', id], proposal);
  void queryClient.invalidateQueries({ queryKey: ['proposals'] });
  return proposal;

  function request() {
    switch (input.step) {
      case 'submit':
        return client.POST('/api/v1/proposals/{id}/submit', { params });
      case 'approve':
        return client.POST('/api/v1/proposals/{id}/approve', { params });
      case 'withdraw':
        return client.POST('/api/v1/proposals/{id}/withdraw', { params });
      case 'keep':
        return client.POST('/api/v1/proposals/{id}/keep', { params });
      case 'decline':
        return client.POST('/api/v1/proposals/{id}/decline', { params, body: { reason: input.reason } });
      case 'roll-back':
        return client.POST('/api/v1/proposals/{id}/roll-back', { params, body: { reason: input.reason } });
      case 'schedule':
        return client.POST('/api/v1/proposals/{id}/schedule', {
          params,
          body: { from: input.from.toISOString(), to: input.to.toISOString() },
        });
      case 'apply':
        return client.POST('/api/v1/proposals/{id}/apply', {
          params,
          body: { checklist: input.checklist, password: input.password },
        });
    }
  }
}

/** Makes a new version with other poles or another structure; the service places the gains. */
export async function alter({ id, version }: Proposal, body: Schemas['AlterProposalDto']): Promise<Proposal> {
  const proposal = await answer(
    client.PATCH('/api/v1/proposals/{id}', {
      params: { path: { id }, header: { 'if-match': String(version) } },
      body,
    }),
  );
  queryClient.setQueryData(['proposal', id], proposal);
  return proposal;
}

/** The proposal on paper. */
export async function saveReport(id: number): Promise<void> {
  const pdf = await answer(
    client.GET('/api/v1/proposals/{id}/report.pdf', { params: { path: { id } }, parseAs: 'blob' }),
  );
  saveFile(pdf as unknown as Blob, `proposal-${id}.pdf`);
}
