import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';

export type HandOver = Schemas['HandOverDto'];
export type Rates = Schemas['RatesDto'];

/** What is handed over on a site; without `from` since the present shift began. */
export const handOverQuery = (siteId: number, from: string | null) =>
  queryOptions({
    queryKey: ['rota', siteId, 'hand-over', from],
    queryFn: () =>
      answer(
        client.GET('/api/v1/on-call/hand-over/{siteId}', {
          params: { path: { siteId }, query: { ...(from && { from }) } },
        }),
      ),
  });

export const ratesQuery = (siteId: number, days: number) =>
  queryOptions({
    queryKey: ['alerts', 'rates', siteId, days],
    queryFn: () => answer(client.GET('/api/v1/on-call/rates', { params: { query: { siteId, days } } })),
    staleTime: 60_000,
  });
