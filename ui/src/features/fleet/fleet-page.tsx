import { SegmentedControl, Select, TextInput, UnstyledButton } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import { useCallback, useEffect, useMemo, useState } from 'react';
import { useSearchParams } from 'react-router-dom';
import { useLiveValues } from '../../api/live';
import { sitesQuery } from '../../api/sites';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { StateGlyph } from '../../components/state-glyph';
import { STATE_WORDS, STATES_WORST_FIRST } from '../../components/states';
import { AxisTable } from './axis-table';
import { AxisTile } from './axis-tile';
import { axesQuery, machinesQuery, stripsQuery, type Axis, type FleetFilter } from './fleet-api';
import classes from './fleet-page.module.css';
import { LiveTiles } from './live-tiles';

const FLEET_WATCH = { fleet: true };

export function Component() {
  const [search, setSearch] = useSearchParams();
  const filter = useMemo(() => filterOf(search), [search]);
  const view = search.get('view') === 'table' ? 'table' : 'tiles';
  const [tiles] = useState(() => new LiveTiles());
  const axes = useQuery(axesQuery(filter));
  const strips = useQuery(stripsQuery);
  const { data: sites } = useQuery(sitesQuery);
  const { data: machines } = useQuery(machinesQuery);
  useEffect(() => {
    for (const { id, seconds } of strips.data?.items ?? []) tiles.fill(id, seconds as never);
  }, [strips.data, tiles]);
  useLiveValues(
    FLEET_WATCH,
    useCallback((values) => tiles.take(values.tiles), [tiles]),
  );
  const set = (name: string, value: string | null): void =>
    setSearch(
      (former) => {
        const next = new URLSearchParams(former);
        if (value) next.set(name, value);
        else next.delete(name);
        return next;
      },
      { replace: true },
    );
  const items = axes.data?.items ?? [];
  const counts = useCounts(filter, items);
  return (
    <>
      <title>Fleet · Polewright</title>
      <div className={classes.heading}>
        <h1>Fleet</h1>
        <span className="soft">{sites?.items.map(({ name }) => name).join(' and ')}, worst first</span>
        <span style={{ flex: 1 }} />
        <SegmentedControl
          size="xs"
          aria-label="Show as"
          value={view}
          onChange={(value) => set('view', value === 'tiles' ? null : value)}
          data={[
            { value: 'tiles', label: 'tiles' },
            { value: 'table', label: 'table' },
          ]}
        />
      </div>
      <div className={classes.filters}>
        <div className={classes.counts} role="group" aria-label="States">
          {STATES_WORST_FIRST.map((state) => (
            <UnstyledButton
              key={state}
              className={classes.count}
              aria-pressed={filter.state === state}
              onClick={() => set('state', filter.state === state ? null : state)}
            >
              <StateGlyph state={state} /> <b>{counts[state] ?? 0}</b> {STATE_WORDS[state].toLowerCase()}
            </UnstyledButton>
          ))}
        </div>
        <div className={classes.selects}>
          <TextInput
            size="xs"
            aria-label="Tag, name or machine"
            placeholder="Tag, name or machine"
            value={search.get('q') ?? ''}
            onChange={(event) => set('q', event.currentTarget.value)}
          />
          <Select
            size="xs"
            aria-label="Site"
            placeholder="All sites"
            clearable
            value={search.get('site')}
            onChange={(value) => set('site', value)}
            data={sites?.items.map(({ id, name }) => ({ value: String(id), label: name })) ?? []}
          />
          <Select
            size="xs"
            aria-label="Machine"
            placeholder="All machines"
            clearable
            searchable
            value={search.get('machine')}
            onChange={(value) => set('machine', value)}
            data={machines?.items.map(({ id, name }) => ({ value: String(id), label: name })) ?? []}
          />
          <Select
            size="xs"
            aria-label="Actuator"
            placeholder="Electric and hydraulic"
            clearable
            value={search.get('actuator')}
            onChange={(value) => set('actuator', value)}
            data={['electric', 'hydraulic']}
          />
        </div>
      </div>
      {axes.error && !axes.data ? (
        <ErrorState error={axes.error} what="The fleet" onRetry={() => void axes.refetch()} />
      ) : axes.isPending ? (
        <Waiting heights={[240, 240]} />
      ) : items.length === 0 ? (
        search.size > 0 ? (
          <EmptyState title="No axis fits this filter">
            Take a filter away to see more of the fleet.
          </EmptyState>
        ) : (
          <EmptyState title="No axes yet">
            An administrator registers the site and its gateways, an engineer the machines and axes. They
            appear here with their first samples.
          </EmptyState>
        )
      ) : view === 'table' ? (
        <AxisTable axes={items} tiles={tiles} />
      ) : (
        <div className={classes.tiles}>
          {items.map((axis) => (
            <AxisTile key={axis.id} axis={axis} tiles={tiles} />
          ))}
        </div>
      )}
    </>
  );
}

function filterOf(search: URLSearchParams): FleetFilter {
  const number = (name: string): number | undefined => Number(search.get(name)) || undefined;
  const state = STATES_WORST_FIRST.find((known) => known === search.get('state'));
  const actuator = (['electric', 'hydraulic'] as const).find((known) => known === search.get('actuator'));
  const siteId = number('site');
  const machineId = number('machine');
  const q = search.get('q')?.trim();
  return {
    ...(siteId && { siteId }),
    ...(machineId && { machineId }),
    ...(state && { state }),
    ...(actuator && { actuator }),
    ...(q && { q }),
  };
}

/** Counts stay those of the whole selection while one state is picked out. */
function useCounts(
  { state: _, ...filter }: FleetFilter,
  items: Axis[],
): Partial<Record<Axis['state'], number>> {
  const { data } = useQuery(axesQuery(filter));
  const counts: Partial<Record<Axis['state'], number>> = {};
  for (const { state } of data?.items ?? items) counts[state] = (counts[state] ?? 0) + 1;
  return counts;
}
