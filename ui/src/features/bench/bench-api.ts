import { keepPreviousData, queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';
import type { Axis } from '../fleet/fleet-api';
import { patternOf, type BenchState } from './bench-state';

type DesignRequest = Schemas['DesignRequestDto'];
type Plant = DesignRequest['plant'];

/** Points of a simulated move that a chart can show. */
const POINTS = 500;
/** How long an answer that nobody looks at is kept, ms: dragging makes many. */
const KEPT = 20_000;

/** Five significant digits: a trembling estimate asks no new question. */
const steady = (value: number): number => Number(value.toPrecision(5));

/** The plant that is tried on; null where the axis has none of that kind. */
export function plantOf(axis: Axis, which: BenchState['plant']): Plant | null {
  const { estimate, baseline } = axis;
  if (which === 'identified' && estimate)
    return {
      gain: steady(estimate.gain.value),
      pole: steady(estimate.pole.value),
      deadTime: steady(Math.max(0, estimate.deadTime)),
      coulomb: steady(Math.max(0, estimate.coulomb.value)),
      bias: steady(estimate.bias.value),
    };
  return baseline && { gain: baseline.gain, pole: baseline.pole };
}

const controllerOf = ({ sampleTime, resolution }: Axis): DesignRequest['controller'] => ({
  sampleTime,
  resolution,
});

function moveOf(axis: Axis, { profile, step }: BenchState): NonNullable<DesignRequest['move']> {
  const common = { holding: true, points: POINTS };
  return profile === 'step'
    ? { ...common, distance: step, duration: axis.sampleTime, settle: 1, profile: 'step' }
    : { ...common, ...axis.move, settle: 0.5, profile: 'raised-cosine' };
}

const designQuery = (body: DesignRequest | null) =>
  queryOptions({
    queryKey: ['design', body],
    enabled: body !== null,
    staleTime: Infinity,
    gcTime: KEPT,
    placeholderData: keepPreviousData,
    // A question that is overtaken is given up, so the newest answer is the one shown.
    queryFn: ({ signal }) => answer(client.POST('/api/v1/design', { body: body!, signal })),
  });

/** What the chosen poles give. */
export function triedQuery(axis: Axis, plant: Plant | null, state: BenchState) {
  return designQuery(
    plant && {
      plant,
      structure: state.structure,
      pattern: patternOf(state),
      feedForward: state.feedForward,
      controller: controllerOf(axis),
      move: moveOf(axis, state),
      remarks: true,
    },
  );
}

/** What today's gains give on the same plant. */
export function todayQuery(axis: Axis, plant: Plant | null, state: BenchState) {
  return designQuery(
    plant &&
      axis.gains && {
        plant,
        structure: axis.structure,
        gains: axis.gains,
        controller: controllerOf(axis),
        move: moveOf(axis, state),
      },
  );
}

/** Which λ the limits of the axis allow; the shape of the pattern counts, not the λ that is tried. */
export function limitsQuery(axis: Axis, plant: Plant | null, state: BenchState) {
  const { estimate, move, tolerances } = axis;
  const region =
    state.plant === 'identified' && estimate
      ? {
          gain: { low: steady(estimate.gain.low), high: steady(estimate.gain.high) },
          pole: { low: steady(estimate.pole.low), high: steady(estimate.pole.high) },
        }
      : undefined;
  const body = plant && {
    plant,
    ...(region && { region }),
    structure: state.structure,
    pattern: patternOf({ ...state, lambda: axis.lambda }),
    feedForward: state.feedForward,
    controller: controllerOf(axis),
    move: { ...move, settle: 1, profile: 'raised-cosine' as const },
    tolerances: { followingError: tolerances.followingError },
  };
  return queryOptions({
    queryKey: ['limits', body],
    enabled: body !== null,
    staleTime: Infinity,
    gcTime: KEPT,
    placeholderData: keepPreviousData,
    queryFn: ({ signal }) => answer(client.POST('/api/v1/design/limits', { body: body!, signal })),
  });
}

/** Drafts a proposal with the poles as they are tried. */
export async function proposeTried(axis: Axis, state: BenchState): Promise<Schemas['ProposalDto']> {
  const { structure, feedForward } = state;
  const proposal = await answer(
    client.POST('/api/v1/proposals', {
      body: { axisId: axis.id, structure, feedForward, pattern: patternOf(state) },
    }),
  );
  void queryClient.invalidateQueries({ queryKey: ['axis', axis.id] });
  return proposal;
}
