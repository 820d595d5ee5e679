import { infiniteQueryOptions, queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { sendOrKeep } from '../../api/kept-acknowledgements';
import { queryClient } from '../../api/query-client';

export type Alert = Schemas['AlertDto'];

/** What is not over, most urgent first; of one site or, without, of all that the person may see. */
export const openAlertsQuery = (siteId?: number) =>
  queryOptions({
    queryKey: ['alerts', 'open', siteId ?? 'all'],
    queryFn: () =>
      answer(
        client.GET('/api/v1/alerts', {
          params: { query: { state: 'open', limit: 500, ...(siteId && { siteId }) } },
        }),
      ),
  });

/** What is over, newest first, page by page. */
export const pastAlertsQuery = (siteId?: number) =>
  infiniteQueryOptions({
    queryKey: ['alerts', 'past', siteId ?? 'all'],
    initialPageParam: undefined as string | undefined,
    queryFn: ({ pageParam }) =>
      answer(
        client.GET('/api/v1/alerts', {
          params: {
            query: {
              state: 'normal',
              limit: 50,
              ...(siteId && { siteId }),
              ...(pageParam && { cursor: pageParam }),
            },
          },
        }),
      ),
    getNextPageParam: ({ nextCursor }) => nextCursor ?? undefined,
  });

export const alertQuery = (id: number) =>
  queryOptions({
    queryKey: ['alerts', id],
    queryFn: () => answer(client.GET('/api/v1/alerts/{id}', { params: { path: { id } } })),
  });

/** A refusal means that somebody else was faster: what is shown is asked for again in either case. */
async function changed(request: Promise<Alert>): Promise<Alert> {
  try {
    const alert = await request;
    queryClient.setQueryData(alertQuery(alert.id).queryKey, alert);
    return alert;
  } finally {
    await queryClient.invalidateQueries({ queryKey: ['alerts'] });
  }
}

/** Acknowledges; without a connection it is kept, answers null, and goes out by itself later. */
export async function acknowledge(id: number): Promise<Alert | null> {
  const sent = sendOrKeep(id);
  const keptHere = (await sent.catch(() => undefined)) === null;
  // Without a connection nothing can be asked for again either.
  return keptHere ? null : changed(sent as Promise<Alert>);
}

export const shelve = (id: number, until: Date, reason: string) =>
  changed(
    answer(
      client.POST('/api/v1/alerts/{id}/shelve', {
        params: { path: { id } },
        body: { until: until.toISOString(), reason },
      }),
    ),
  );

export const unshelve = (id: number) =>
  changed(answer(client.POST('/api/v1/alerts/{id}/unshelve', { params: { path: { id } } })));

export const takeOutOfService = (id: number, reason: string) =>
  changed(
    answer(
      client.POST('/api/v1/alerts/{id}/take-out-of-service', { params: { path: { id } }, body: { reason } }),
    ),
  );

export const returnToService = (id: number) =>
  changed(answer(client.POST('/api/v1/alerts/{id}/return-to-service', { params: { path: { id } } })));

export const addNote = (id: number, note: string) =>
  changed(answer(client.POST('/api/v1/alerts/{id}/note', { params: { path: { id } }, body: { note } })));

export type AcknowledgeLink = Schemas['AcknowledgeLinkDto'];

/** What the link in a mail would acknowledge. */
export const linkQuery = (token: string) =>
  queryOptions({
    queryKey: ['acknowledge', token],
    queryFn: () => answer(client.GET('/api/v1/acknowledge/{token}', { params: { path: { token } } })),
  });

export async function acknowledgeByLink(token: string): Promise<void> {
  try {
    await answer(client.POST('/api/v1/acknowledge/{token}', { params: { path: { token } } }));
  } finally {
    await queryClient.invalidateQueries({ queryKey: ['acknowledge', token] });
  }
}
