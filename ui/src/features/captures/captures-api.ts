import { keepPreviousData, queryOptions } from '@tanstack/react-query';
import { answer, client, Problem, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';
import { getAccessToken, refreshSession } from '../../api/session';

export type Capture = Schemas['CaptureDto'];
export type Mapping = Schemas['CaptureMappingDto'];

const isOpen = ({ status }: Capture): boolean => status === 'queued' || status === 'running';
/** How often a capture that is being worked out is asked after, ms. */
const ASKED_EVERY = 1_000;

export const capturesQuery = (axisId?: number) =>
  queryOptions({
    queryKey: ['captures', { axisId }],
    queryFn: () =>
      answer(client.GET('/api/v1/captures', { params: { query: { axisId, limit: axisId ? 12 : 100 } } })),
    placeholderData: keepPreviousData,
    refetchInterval: ({ state }) => (state.data?.items.some(isOpen) ? ASKED_EVERY : false),
  });

export const captureQuery = (id: number) =>
  queryOptions({
    queryKey: ['capture', id],
    queryFn: () => answer(client.GET('/api/v1/captures/{id}', { params: { path: { id } } })),
    refetchInterval: ({ state }) => (state.data && isOpen(state.data) ? ASKED_EVERY : false),
  });

export const captureTraceQuery = (id: number, done: boolean) =>
  queryOptions({
    queryKey: ['capture-trace', id],
    enabled: done,
    staleTime: Infinity,
    queryFn: () =>
      answer(
        client.GET('/api/v1/captures/{id}/trace', { params: { path: { id }, query: { points: 1_000 } } }),
      ),
  });

const again = (): void => void queryClient.invalidateQueries({ queryKey: ['captures'] });

/**
 * Sends a file with its mapping, telling how much has gone.
 *
 * @param onSent share of the bytes, 0 … 1
 * @throws Problem what the service refused; Error when it does not answer or the sending was given up
 */
export async function uploadCapture(
  { file, mapping, axisId }: { file: File; mapping: Mapping; axisId: number | null },
  onSent: (share: number) => void,
  signal: AbortSignal,
): Promise<number> {
  const form = new FormData();
  form.set('mapping', JSON.stringify(mapping));
  if (axisId !== null) form.set('axisId', String(axisId));
  form.set('file', file);
  let { status, body } = await send(form, onSent, signal);
  if (status === 401 && (await refreshSession())) ({ status, body } = await send(form, onSent, signal));
  if (status !== 201) throw new Problem(status, body as object);
  again();
  return (body as { id: number }).id;
}

/** XMLHttpRequest, because fetch does not tell how far an upload is. */
function send(
  form: FormData,
  onSent: (share: number) => void,
  signal: AbortSignal,
): Promise<{ status: number; body: unknown }> {
  return new Promise((resolve, reject) => {
    const request = new XMLHttpRequest();
    request.open('POST', '/api/v1/captures');
    request.responseType = 'json';
    request.setRequestHeader('authorization', `Bearer ${getAccessToken()}`);
    request.upload.onprogress = ({ loaded, total }) => onSent(total > 0 ? loaded / total : 0);
    request.onload = () => resolve({ status: request.status, body: request.response ?? {} });
    request.onerror = () => reject(new Error('The service does not answer. Nothing was stored; try again.'));
    request.onabort = () => reject(new Error('The upload was given up. Nothing was stored.'));
    signal.addEventListener('abort', () => request.abort());
    request.send(form);
  });
}

export async function cancelCapture(id: number): Promise<Capture> {
  const capture = await answer(client.POST('/api/v1/captures/{id}/cancel', { params: { path: { id } } }));
  queryClient.setQueryData(['capture', id], capture);
  again();
  return capture;
}

export async function removeCapture(id: number): Promise<void> {
  await answer(client.DELETE('/api/v1/captures/{id}', { params: { path: { id } } }));
  again();
}

export async function takeAsBaseline(id: number, axisId: number): Promise<void> {
  await answer(client.POST('/api/v1/captures/{id}/baseline', { params: { path: { id } }, body: { axisId } }));
  void queryClient.invalidateQueries({ queryKey: ['axis', axisId] });
}

export async function recordCapture(axisId: number, seconds: number): Promise<number> {
  const { id } = await answer(
    client.POST('/api/v1/axes/{id}/captures', { params: { path: { id: axisId } }, body: { seconds } }),
  );
  again();
  return id;
}

/** Saves an answer of the service as a file. */
export async function download(path: string, name: string): Promise<void> {
  const ask = () => fetch(path, { headers: { authorization: `Bearer ${getAccessToken()}` } });
  let response = await ask();
  if (response.status === 401 && (await refreshSession())) response = await ask();
  if (!response.ok) throw new Problem(response.status, {});
  saveAs(await response.blob(), name);
}

export function saveAs(blob: Blob, name: string): void {
  const link = document.createElement('a');
  link.href = URL.createObjectURL(blob);
  link.download = name;
  link.click();
  URL.revokeObjectURL(link.href);
}
