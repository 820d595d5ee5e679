import { infiniteQueryOptions, queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';

export type Alert = Schemas['AlertDto'];

/** What is not over, most urgent first. */
export const openAlertsQuery = queryOptions({
  queryKey: ['alerts', 'open'],
  queryFn: () => answer(client.GET('/api/v1/alerts', { params: { query: { state: 'open', limit: 500 } } })),
});

/** What is over, newest first, page by page. */
export const pastAlertsQuery = infiniteQueryOptions({
  queryKey: ['alerts', 'past'],
  initialPageParam: undefined as string | undefined,
  queryFn: ({ pageParam }) =>
    answer(
      client.GET('/api/v1/alerts', {
        params: { query: { state: 'normal', limit: 50, ...(pageParam && { cursor: pageParam }) } },
      }),
    ),
  getNextPageParam: ({ nextCursor }) => nextCursor ?? undefined,
});

export const alertQuery = (id: number) =>
  queryOptions({
    queryKey: ['alerts', id],
    queryFn: () => answer(client.GET('/api/v1/alerts/{id}', { params: { path: { id } } })),
  });

async function changed(request: Promise<Alert>): Promise<Alert> {
  const alert = await request;
  queryClient.setQueryData(['alerts', alert.id], alert);
  await queryClient.invalidateQueries({ queryKey: ['alerts'] });
  return alert;
}

export const acknowledge = (id: number) =>
  changed(answer(client.POST('/api/v1/alerts/{id}/acknowledge', { params: { path: { id } }, body: {} })));

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

export const addNote = (id: number, note: string) =>
  changed(answer(client.POST('/api/v1/alerts/{id}/note', { params: { path: { id } }, body: { note } })));
