import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';

export type Intake = Schemas['IntakeDto'];
export type GatewayIntake = Schemas['GatewayIntakeDto'];

/** How the intake fares now, of the gateways of the reader's sites. */
export const intakeQuery = queryOptions({
  queryKey: ['intake'],
  queryFn: () => answer(client.GET('/api/v1/intake')),
  refetchInterval: 2_000,
});
