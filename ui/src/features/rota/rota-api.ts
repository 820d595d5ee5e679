import { infiniteQueryOptions, queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';

export type Rota = Schemas['RotaDto'];

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

export const setRotation = (siteId: number, body: Schemas['SetRotationDto']) =>
  changed(answer(client.PUT('/api/v1/rota/{siteId}', { params: { path: { siteId } }, body })));

export const addOverride = (siteId: number, body: Schemas['AddOverrideDto']) =>
  changed(answer(client.POST('/api/v1/rota/{siteId}/overrides', { params: { path: { siteId } }, body })));

export const removeOverride = (siteId: number, id: number) =>
  changed(
    answer(client.DELETE('/api/v1/rota/{siteId}/overrides/{id}', { params: { path: { siteId, id } } })),
  );

export const writeNote = (siteId: number, text: string) =>
  changed(
    answer(client.POST('/api/v1/rota/{siteId}/notes', { params: { path: { siteId } }, body: { text } })),
  );
