import { infiniteQueryOptions, queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';

export type DemoMessage = Schemas['DemoMessageDto'];

/** What the service has to send, newest first, page by page. */
export const outboxQuery = infiniteQueryOptions({
  queryKey: ['mail', 'outbox'],
  initialPageParam: undefined as string | undefined,
  queryFn: ({ pageParam }) =>
    answer(
      client.GET('/api/v1/mail/outbox', {
        params: { query: { limit: 50, ...(pageParam && { cursor: pageParam }) } },
      }),
    ),
  getNextPageParam: ({ nextCursor }) => nextCursor ?? undefined,
  refetchInterval: 5_000,
});

/** What has arrived at the demo's stand-in for everybody's mailboxes; 404 where there is none. */
export const demoInboxQuery = queryOptions({
  queryKey: ['mail', 'demo-inbox'],
  queryFn: () => answer(client.GET('/api/v1/mail/demo-inbox')),
  refetchInterval: 3_000,
  retry: false,
});

export async function resend(id: number): Promise<void> {
  try {
    await answer(client.POST('/api/v1/mail/outbox/{id}/resend', { params: { path: { id } } }));
  } finally {
    await queryClient.invalidateQueries({ queryKey: ['mail'] });
  }
}
