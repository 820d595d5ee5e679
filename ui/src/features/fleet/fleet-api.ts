import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';

export type Axis = Schemas['AxisDto'];

export interface FleetFilter {
  siteId?: number;
  machineId?: number;
  state?: Axis['state'];
  actuator?: Axis['actuator'];
  q?: string;
}

/** Every axis that fits, worst first. */
export const axesQuery = (filter: FleetFilter) =>
  queryOptions({
    queryKey: ['axes', filter],
    queryFn: () => answer(client.GET('/api/v1/axes', { params: { query: { ...filter, limit: 1000 } } })),
    placeholderData: (former) => former,
  });

/** The last two minutes of every axis; what follows arrives live. */
export const stripsQuery = queryOptions({
  queryKey: ['strips'],
  queryFn: () => answer(client.GET('/api/v1/axes/strips')),
  staleTime: Infinity,
  gcTime: 0,
});

export const machinesQuery = queryOptions({
  queryKey: ['machines'],
  queryFn: () => answer(client.GET('/api/v1/machines')),
  staleTime: 300_000,
});
