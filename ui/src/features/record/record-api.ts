import { infiniteQueryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { saveFile } from '../../api/download';

export type Entry = Schemas['AuditEntryDto'];
export type ChainReport = Schemas['AuditChainDto'];

export interface RecordFilter {
  siteId?: number;
  subjectType?: string;
  subjectId?: string;
}

/** What people and the service did, newest first, page by page. */
export const recordQuery = (filter: RecordFilter) =>
  infiniteQueryOptions({
    queryKey: ['record', filter],
    initialPageParam: undefined as string | undefined,
    queryFn: ({ pageParam }) =>
      answer(
        client.GET('/api/v1/audit', {
          params: { query: { ...filter, limit: 50, ...(pageParam && { cursor: pageParam }) } },
        }),
      ),
    getNextPageParam: ({ nextCursor }) => nextCursor ?? undefined,
  });

export const checkRecord = (): Promise<ChainReport> => answer(client.GET('/api/v1/audit/chain'));

export async function exportRecord(filter: RecordFilter): Promise<void> {
  const lines = await answer(
    client.GET('/api/v1/audit/export', { params: { query: filter }, parseAs: 'blob' }),
  );
  saveFile(lines as unknown as Blob, 'polewright-record.jsonl');
}
