import { Button, SegmentedControl } from '@mantine/core';
import { useInfiniteQuery, useQuery } from '@tanstack/react-query';
import { useSearchParams } from 'react-router-dom';
import { useLiveStatus } from '../../api/live';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { AlertCard } from './alert-card';
import classes from './alerts.module.css';
import { openAlertsQuery, pastAlertsQuery } from './alerts-api';

export function Component() {
  const [search, setSearch] = useSearchParams();
  const past = search.get('show') === 'past';
  return (
    <>
      <title>Alerts · Polewright</title>
      <div style={{ display: 'flex', alignItems: 'baseline', gap: 14, flexWrap: 'wrap' }}>
        <h1>Alerts</h1>
        <span style={{ flex: 1 }} />
        <SegmentedControl
          size="xs"
          aria-label="Which alerts"
          value={past ? 'past' : 'open'}
          onChange={(value) => setSearch(value === 'past' ? { show: 'past' } : {}, { replace: true })}
          data={[
            { value: 'open', label: 'open' },
            { value: 'past', label: 'past' },
          ]}
        />
      </div>
      {past ? <Past /> : <Open />}
    </>
  );
}

function Open() {
  const { data, error, isPending, refetch } = useQuery(openAlertsQuery);
  const { connected } = useLiveStatus();
  if (error && !data) return <ErrorState error={error} what="The alerts" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[24, 220, 220]} />;
  const waiting = data.items.filter(
    ({ state }) => state === 'unacknowledged' || state === 'returned-unacknowledged',
  ).length;
  const taken = data.items.filter(({ state }) => state === 'acknowledged').length;
  return (
    <>
      <p className="soft" role="status" style={{ margin: '4px 0 24px' }}>
        {waiting === 0 ? 'Nothing waits for you' : `${waiting} wait${waiting === 1 ? 's' : ''} for somebody`}{' '}
        · {taken} acknowledged{connected && ' · live'}
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

function Past() {
  const { data, error, isPending, refetch, hasNextPage, fetchNextPage, isFetchingNextPage } =
    useInfiniteQuery(pastAlertsQuery);
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
      {hasNextPage && (
        <Button variant="outline" mt="lg" loading={isFetchingNextPage} onClick={() => void fetchNextPage()}>
          Older ones
        </Button>
      )}
    </div>
  );
}
