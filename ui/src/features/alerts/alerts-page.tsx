import { Button, SegmentedControl, Select } from '@mantine/core';
import { useInfiniteQuery, useQuery } from '@tanstack/react-query';
import { Link, useSearchParams } from 'react-router-dom';
import { useLiveStatus } from '../../api/live';
import { sitesQuery } from '../../api/sites';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { AlertCard } from './alert-card';
import classes from './alerts.module.css';
import { openAlertsQuery, pastAlertsQuery } from './alerts-api';

export function Component() {
  const [search, setSearch] = useSearchParams();
  const { data: sites } = useQuery(sitesQuery);
  const past = search.get('show') === 'past';
  const siteId = Number(search.get('site')) || undefined;
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
  return (
    <>
      <title>Alerts · Polewright</title>
      <div className={classes.heading}>
        <h1>Alerts</h1>
        <Link to={`/alerts/rates${siteId ? `?site=${siteId}` : ''}`}>Rates</Link>
        <span style={{ flex: 1 }} />
        {sites && sites.items.length > 1 && (
          <Select
            size="xs"
            w={150}
            aria-label="Site"
            placeholder="All sites"
            clearable
            value={siteId ? String(siteId) : null}
            onChange={(value) => set('site', value)}
            data={sites.items.map(({ id, name }) => ({ value: String(id), label: name }))}
          />
        )}
        <SegmentedControl
          size="xs"
          aria-label="Which alerts"
          value={past ? 'past' : 'open'}
          onChange={(value) => set('show', value === 'past' ? 'past' : null)}
          data={[
            { value: 'open', label: 'open' },
            { value: 'past', label: 'past' },
          ]}
        />
      </div>
      {past ? <Past siteId={siteId} /> : <Open siteId={siteId} />}
    </>
  );
}

function Open({ siteId }: { siteId: number | undefined }) {
  const { data, error, isPending, refetch, dataUpdatedAt } = useQuery(openAlertsQuery(siteId));
  const { connected, lastAt } = useLiveStatus();
  if (error && !data) return <ErrorState error={error} what="The alerts" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[24, 220, 220]} />;
  const waiting = data.items.filter(
    ({ state }) => state === 'unacknowledged' || state === 'returned-unacknowledged',
  ).length;
  const taken = data.items.filter(({ state }) => state === 'acknowledged').length;
  return (
    <>
      <p className="soft" style={{ margin: '4px 0 24px' }}>
        <span role="status">
          {waiting === 0 ? 'Nothing waits' : `${waiting} wait${waiting === 1 ? 's' : ''} for somebody`} ·{' '}
          {taken} acknowledged
        </span>
        {connected && ' · live'}
        {!connected && lastAt && (
          <b style={{ color: 'var(--out)' }}> · no connection, last update {clock(dataUpdatedAt)}</b>
        )}
      </p>
      {data.items.length === 0 ? (
        <EmptyState title="Nothing needs you">
          An alert appears here when an axis saturates, lags, hums, drifts, stiffens or falls silent.
        </EmptyState>
      ) : (
        <div className={classes.list}>
          {data.items.map((alert) => (
            <AlertCard key={alert.id} alert={alert} />
          ))}
        </div>
      )}
    </>
  );
}

/** On the reader's own clock, such as 14:03. */
const clock = (at: number): string =>
  new Date(at).toLocaleTimeString('en-GB', { hour: '2-digit', minute: '2-digit' });

function Past({ siteId }: { siteId: number | undefined }) {
  const { data, error, isPending, refetch, hasNextPage, fetchNextPage, isFetchingNextPage } =
    useInfiniteQuery(pastAlertsQuery(siteId));
  if (error && !data)
    return <ErrorState error={error} what="The past alerts" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[220, 220]} />;
  const alerts = data.pages.flatMap(({ items }) => items);
  if (alerts.length === 0)
    return <EmptyState title="No alert is over yet">Alerts that have ended are kept here.</EmptyState>;
  return (
    <div style={{ marginTop: 28 }}>
      <div className={classes.list}>
        {alerts.map((alert) => (
          <AlertCard key={alert.id} alert={alert} />
        ))}
      </div>
      {error && (
        <p role="alert" className={classes.refusal}>
          The older ones could not be loaded: {error.message}
        </p>
      )}
      {hasNextPage && (
        <Button variant="outline" mt="lg" loading={isFetchingNextPage} onClick={() => void fetchNextPage()}>
          Older ones
        </Button>
      )}
    </div>
  );
}
