import { infiniteQueryOptions, queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';

export type Rota = Schemas['RotaDto'];

/** Those who can be on call on a site, for a field that chooses one. */
export const choicesOf = ({ available }: Rota): { value: string; label: string }[] =>
  available.map(({ userId, name }) => ({ value: String(userId), label: name }));

export const rotaQuery = (siteId: number) =>
  queryOptions({
    queryKey: ['rota', siteId],
    queryFn: () => answer(client.GET('/api/v1/rota', { params: { query: { siteId } } })),
  });

/** Hand-over notes, newest first, page by page. */
export const notesQuery = (siteId: number) =>
  infiniteQueryOptions({
    queryKey: ['rota', siteId, 'notes'],
    initialPageParam: undefined as string | undefined,
    queryFn: ({ pageParam }) =>
      answer(
        client.GET('/api/v1/rota/{siteId}/notes', {
          params: { path: { siteId }, query: { limit: 10, ...(pageParam && { cursor: pageParam }) } },
        }),
      ),
    getNextPageParam: ({ nextCursor }) => nextCursor ?? undefined,
  });

async function changed<T>(request: Promise<T>): Promise<T> {
  const result = await request;
  await queryClient.invalidateQueries({ queryKey: ['rota'] });
  await queryClient.invalidateQueries({ queryKey: ['on-call'] });
  return result;
}

export const setLayers = (siteId: number, layers: Schemas['SetLayerDto'][]) =>
  changed(answer(client.PUT('/api/v1/rota/{siteId}', { params: { path: { siteId } }, body: { layers } })));

export const addOverride = (siteId: number, body: Schemas['AddOverrideDto']) =>
  changed(answer(client.POST('/api/v1/rota/{siteId}/overrides', { params: { path: { siteId } }, body })));

export const removeOverride = (siteId: number, id: number) =>
  changed(
    answer(client.DELETE('/api/v1/rota/{siteId}/overrides/{id}', { params: { path: { siteId, id } } })),
  );

export const askSwap = (siteId: number, body: Schemas['AskSwapDto']) =>
  changed(answer(client.POST('/api/v1/rota/{siteId}/swaps', { params: { path: { siteId } }, body })));

export type SwapAnswer = 'accept' | 'decline' | 'withdraw';

export const answerSwap = (siteId: number, id: number, how: SwapAnswer) =>
  changed(
    answer(client.POST(`/api/v1/rota/{siteId}/swaps/{id}/${how}`, { params: { path: { siteId, id } } })),
  );

/** The person's own calendar feeds. */
export const feedsQuery = queryOptions({
  queryKey: ['rota', 'feeds'],
  queryFn: () => answer(client.GET('/api/v1/rota/feeds')),
});

export const makeFeed = (siteId: number, own: boolean) =>
  changed(
    answer(client.POST('/api/v1/rota/{siteId}/feeds', { params: { path: { siteId } }, body: { own } })),
  );

export const revokeFeed = (id: number) =>
  changed(answer(client.DELETE('/api/v1/rota/feeds/{id}', { params: { path: { id } } })));

/** The shifts of the next four weeks as CSV. */
export async function exportShifts(siteId: number): Promise<Blob> {
  const text = await answer(
    client.GET('/api/v1/rota/{siteId}/shifts.csv', { params: { path: { siteId } }, parseAs: 'text' }),
  );
  return new Blob([text], { type: 'text/csv' });
}

/** People who stand in, from a CSV file: all of its lines or none. */
export const importOverrides = (siteId: number, file: File) =>
  changed(
    answer(
      client.POST('/api/v1/rota/{siteId}/overrides.csv', {
        params: { path: { siteId } },
        body: { file: file as unknown as string },
        bodySerializer: () => {
          const form = new FormData();
          form.set('file', file);
          return form;
        },
      }),
    ),
  );

export const writeNote = (siteId: number, text: string) =>
  changed(
    answer(client.POST('/api/v1/rota/{siteId}/notes', { params: { path: { siteId } }, body: { text } })),
  );
