import { queryOptions } from '@tanstack/react-query';
import { answer, client } from './client';

export const sitesQuery = queryOptions({
  queryKey: ['sites'],
  queryFn: () => answer(client.GET('/api/v1/sites')),
  staleTime: 300_000,
});
