import { infiniteQueryOptions, queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';

export type DemoMessage = Schemas['DemoMessageDto'];

export type MailState = Schemas['MailDto']['state'];

/** What the service has to send, newest first, page by page; of one state or of all. */
export const outboxQuery = (state: MailState | null) =>
  infiniteQueryOptions({
    queryKey: ['mail', 'outbox', state ?? 'all'],
    initialPageParam: undefined as string | undefined,
    queryFn: ({ pageParam }) =>
      answer(
        client.GET('/api/v1/mail/outbox', {
          params: { query: { limit: 50, ...(state && { state }), ...(pageParam && { cursor: pageParam }) } },
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
