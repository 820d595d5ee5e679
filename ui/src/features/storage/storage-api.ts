import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';

export type Storage = Schemas['StorageDto'];
export type Backup = Schemas['BackupDto'];
export type TableSize = Schemas['TableSizeDto'];
export type Retention = Schemas['RetentionDto'];
export type RetentionKind = Retention['kind'];

const isBusy = ({ backups, measuring, checking }: Storage): boolean =>
  backups.progress !== null || measuring || checking.length > 0;

/** What the data folder holds; asked again soon while something is under way. */
export const storageQuery = queryOptions({
  queryKey: ['storage'],
  queryFn: () => answer(client.GET('/api/v1/storage')),
  refetchInterval: ({ state }) => (state.data && isBusy(state.data) ? 1_500 : 20_000),
});

/** Each answers with what the data folder holds now, which takes the place of what the page showed. */
async function begun(request: Promise<Storage>): Promise<Storage> {
  const storage = await request;
  queryClient.setQueryData(storageQuery.queryKey, storage);
  return storage;
}

export const measure = (): Promise<Storage> => begun(answer(client.POST('/api/v1/storage/measurements')));

export const backUp = (): Promise<Storage> => begun(answer(client.POST('/api/v1/storage/backups')));

/** Reads every page of the database, or of the backup of this name. */
export const check = (subject: string): Promise<Storage> =>
  begun(answer(client.POST('/api/v1/storage/checks', { body: { subject } })));

export const changeRetention = (body: Partial<Record<RetentionKind, number>>): Promise<Storage> =>
  begun(answer(client.PATCH('/api/v1/storage/retention', { body })));

/** A size in the largest binary unit that leaves a whole part (IEC 80000-13): "3.4 GiB". */
export function bytes(size: number): string {
  const units = ['B', 'KiB', 'MiB', 'GiB', 'TiB'];
  const power = Math.min(units.length - 1, Math.max(0, Math.floor(Math.log2(Math.max(1, size)) / 10)));
  const value = size / 1024 ** power;
  return `${value.toFixed(power === 0 || value >= 100 ? 0 : 1)} ${units[power]}`;
}

/** A count in groups of three, as ISO 80000-1 writes numbers. */
export const count = (value: number): string =>
  Math.round(value).toLocaleString('en-GB').replaceAll(',', ' ').replace('-', '−');

/** A stretch of time in the unit that people set it in: "2 h", "60 days", "3 years". */
export function stretch(seconds: number): string {
  const days = seconds / 86_400;
  if (days < 1) return `${Number((seconds / 3_600).toFixed(1))} h`;
  if (days >= 365 && days % 365 === 0) return `${days / 365} ${days === 365 ? 'year' : 'years'}`;
  return `${Number(days.toFixed(1))} ${days === 1 ? 'day' : 'days'}`;
}
