import { queryOptions } from '@tanstack/react-query';
import { answer, client } from '../api/client';

export const summaryQuery = queryOptions({
  queryKey: ['summary'],
  queryFn: () => answer(client.GET('/api/v1/axes/summary')),
});

export const onCallQuery = queryOptions({
  queryKey: ['on-call'],
  queryFn: () => answer(client.GET('/api/v1/rota/on-call')),
  staleTime: 60_000,
});
