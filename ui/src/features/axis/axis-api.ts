import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { saveFile } from '../../api/download';
import type { Axis } from '../fleet/fleet-api';

export const axisQuery = (id: number) =>
  queryOptions({
    queryKey: ['axis', id],
    queryFn: () => answer(client.GET('/api/v1/axes/{id}', { params: { path: { id } } })),
  });

/** Spans that the histories can show, s. */
export const SPANS = { '1 h': 3_600, '1 day': 86_400, '30 days': 30 * 86_400 } as const;
export type Span = keyof typeof SPANS;

/** Estimates that a history shows at most: more than its width can tell apart. */
const CHART_POINTS = 600;

export const estimatesQuery = (id: number, span: Span) =>
  queryOptions({
    queryKey: ['estimates', id, span],
    queryFn: () =>
      answer(
        client.GET('/api/v1/axes/{id}/estimates', {
          params: {
            path: { id },
            query: { from: new Date(Date.now() - SPANS[span] * 1000).toISOString(), points: CHART_POINTS },
          },
        }),
      ),
    refetchInterval: 10_000,
    placeholderData: (former) => former,
  });

export const tuningsQuery = (id: number) =>
  queryOptions({
    queryKey: ['tunings', id],
    queryFn: () => answer(client.GET('/api/v1/axes/{id}/tunings', { params: { path: { id } } })),
  });

/** The loop of the axis's present gains on a plant; computed by the service, nothing is stored. */
export const loopQuery = (axis: Axis, plant: { gain: number; pole: number } | null) =>
  queryOptions({
    queryKey: ['loop', axis.id, axis.revision, plant],
    enabled: plant !== null && axis.gains !== null,
    staleTime: Infinity,
    queryFn: () =>
      answer(
        client.POST('/api/v1/design', {
          body: {
            plant: plant!,
            structure: axis.structure,
            pattern: axis.pattern,
            gains: axis.gains!,
            feedForward: axis.feedForward,
            controller: { sampleTime: axis.sampleTime, resolution: axis.resolution },
          } as Schemas['DesignRequestDto'],
        }),
      ),
  });

export const maintain = (id: number, body: Schemas['MaintenanceDto']) =>
  answer(client.POST('/api/v1/axes/{id}/maintenance', { params: { path: { id } }, body }));

export const startProposal = (axisId: number) =>
  answer(client.POST('/api/v1/proposals', { body: { axisId } }));

export const confirmBaseline = (id: number) =>
  answer(client.POST('/api/v1/axes/{id}/baseline', { params: { path: { id } }, body: { confirm: true } }));

export type Tuning = Schemas['TuningRevisionDto'];

/** The gains of a former revision as a new proposal: they take the same way as any others. */
export const proposeAgain = (axisId: number, { revision, structure, feedForward, gains }: Tuning) =>
  answer(
    client.POST('/api/v1/proposals', {
      body: { axisId, structure, feedForward, gains, note: `As revision ${revision}` },
    }),
  );

export async function saveTuningsCsv({ id, tag }: { id: number; tag: string }): Promise<void> {
  const csv = await answer(
    client.GET('/api/v1/axes/{id}/tunings.csv', { params: { path: { id } }, parseAs: 'blob' }),
  );
  saveFile(csv as unknown as Blob, `${tag} tunings.csv`);
}
