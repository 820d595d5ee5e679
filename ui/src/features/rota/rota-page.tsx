import { useQuery } from '@tanstack/react-query';
import { Link } from 'react-router-dom';
import { may } from '../../api/policy';
import { sitesQuery } from '../../api/sites';
import { useSession } from '../../api/use-session';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';
import { HandOverNotes } from './hand-over-notes';
import { OverrideForm } from './override-form';
import { rotaQuery } from './rota-api';
import { LayersForm } from './layers-form';
import classes from './rota.module.css';
import { OutsideCard } from './outside-card';
import { Shifts } from './shifts';
import { Swaps } from './swaps';

export function Component() {
  const { data: sites, error, isPending, refetch } = useQuery(sitesQuery);
  return (
    <>
      <title>Rota · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>Rota</h1>
      {error && !sites && <ErrorState error={error} what="The rota" onRetry={() => void refetch()} />}
      {isPending && <Waiting heights={[300]} />}
      {sites?.items.length === 0 && (
        <EmptyState title="No site yet">
          A rota belongs to a site; an administrator adds the first.
        </EmptyState>
      )}
      <div style={{ display: 'grid', gap: 28 }}>
        {sites?.items.map(({ id, name }) => (
          <SiteRota key={id} siteId={id} siteName={name} />
        ))}
      </div>
    </>
  );
}

function SiteRota({ siteId, siteName }: { siteId: number; siteName: string }) {
  const { user } = useSession();
  const { data: rota, error, refetch } = useQuery(rotaQuery(siteId));
  if (error && !rota)
    return <ErrorState error={error} what={`The rota of ${siteName}`} onRetry={() => void refetch()} />;
  if (!rota) return <Waiting heights={[220]} />;
  const onCallPart = may(user, 'alert.acknowledge', siteId);
  return (
    <section className={classes.site} aria-label={siteName}>
      <div>
        <h2 style={{ fontSize: 18 }}>{siteName}</h2>
        <div>
          {rota.onCall ? (
            <>
              On call now: <b>{rota.onCall.name}</b> until{' '}
              <SiteTime at={rota.onCall.until} timeZone={rota.timeZone} />
            </>
          ) : (
            <b style={{ color: 'var(--out)' }}>Nobody is on call now: alerts reach no one.</b>
          )}{' '}
          <span className="soft small">{rota.timeZone}</span> ·{' '}
          <Link to={`/rota/${siteId}/hand-over`}>Hand-over sheet</Link>
        </div>
      </div>
      <div className={classes.columns}>
        <Shifts rota={rota} />
        {may(user, 'rota.override', siteId) && (
          <div className={classes.stack}>
            <OverrideForm rota={rota} />
            {(onCallPart || rota.swaps.length > 0) && <Swaps rota={rota} />}
          </div>
        )}
        <HandOverNotes siteId={siteId} timeZone={rota.timeZone} writes={may(user, 'note.write', siteId)} />
      </div>
      {may(user, 'rota.change', siteId) && <LayersForm rota={rota} />}
      <OutsideCard rota={rota} siteName={siteName} imports={may(user, 'rota.change', siteId)} />
    </section>
  );
}
