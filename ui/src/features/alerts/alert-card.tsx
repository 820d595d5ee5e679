import { Button } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { Link } from 'react-router-dom';
import { useKept } from '../../api/kept-acknowledgements';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { SiteTime } from '../../components/site-time';
import { StateEdge } from '../../components/state-edge';
import { STATE_COLOUR, STATE_TINT, type AxisState } from '../../components/states';
import classes from './alerts.module.css';
import { acknowledge, unshelve, type Alert } from './alerts-api';
import { Service } from './out-of-service';
import { ShelveDialog } from './shelve-dialog';

const WORDS: Record<Alert['state'], string> = {
  unacknowledged: 'Unacknowledged',
  acknowledged: 'Acknowledged',
  'returned-unacknowledged': 'Returned to normal, unacknowledged',
  shelved: 'Shelved',
  suppressed: 'Suppressed by design',
  'out-of-service': 'Out of service',
  normal: 'Over',
};

/** The edge that an alert has: what needs a person now is broken, what somebody has taken is tilted. */
export function edgeOf({ state, priority }: Alert): AxisState {
  if (state === 'unacknowledged') return priority === 'low' ? 'drifting' : 'out-of-tune';
  if (state === 'acknowledged' || state === 'returned-unacknowledged') return 'drifting';
  return state === 'normal' ? 'in-tune' : 'in-maintenance';
}

export function AlertCard({ alert, detailed = false }: { alert: Alert; detailed?: boolean }) {
  const { user } = useSession();
  const [shelving, setShelving] = useState(false);
  const take = useMutation({ mutationFn: () => acknowledge(alert.id) });
  const unshelving = useMutation({ mutationFn: () => unshelve(alert.id) });
  const kept = useKept(alert.id);
  const edge = edgeOf(alert);
  const told = alert.events.filter(
    ({ at, action }) => (action === 'told' || action === 'nobody on call') && at >= alert.raisedAt,
  );
  const refusal = take.error ?? unshelving.error;
  const acknowledgeable = alert.state === 'unacknowledged' || alert.state === 'returned-unacknowledged';
  const shelvable = acknowledgeable || alert.state === 'acknowledged';
  const allowed = may(user, 'alert.acknowledge', alert.siteId);
  return (
    <article
      className={classes.card}
      style={{ background: STATE_TINT[edge] }}
      data-alert={alert.id}
      data-state={alert.state}
    >
      <StateEdge state={edge} />
      <div className={classes.meta}>
        <b style={{ color: STATE_COLOUR[edge], fontWeight: 600 }}>
          {WORDS[alert.state]}
          {alert.state === 'unacknowledged' && `, ${alert.priority}`}
        </b>
        {alert.acknowledgedBy && alert.acknowledgedAt && (
          <>
            {' '}
            by {alert.acknowledgedBy}, <SiteTime at={alert.acknowledgedAt} timeZone={alert.timeZone} />
          </>
        )}
        {alert.shelvedUntil && (
          <>
            {' '}
            until <SiteTime at={alert.shelvedUntil} timeZone={alert.timeZone} /> by {alert.shelvedBy}:{' '}
            {alert.shelveReason}
          </>
        )}
        {alert.suppressedBecause && `: ${alert.suppressedBecause}`}
        {alert.outOfServiceReason && ` by ${alert.outOfServiceBy}: ${alert.outOfServiceReason}`} ·{' '}
        <SiteTime at={alert.raisedAt} timeZone={alert.timeZone} relative />
        {alert.returnedAt && (
          <>
            , returned to normal <SiteTime at={alert.returnedAt} timeZone={alert.timeZone} />
          </>
        )}
        {alert.nextStepAt && alert.state === 'unacknowledged' && (
          <>
            , next mail at <SiteTime at={alert.nextStepAt} timeZone={alert.timeZone} />
          </>
        )}
      </div>
      <h2 className={classes.title}>
        <Link to={`/alerts/${alert.id}`}>
          {alert.axisTag}: {alert.title}
        </Link>
      </h2>
      <div className={classes.meta}>
        {alert.axisName}, {alert.machineName}, {alert.siteName}
      </div>
      <p style={{ fontWeight: 560 }}>{alert.message}</p>
      {alert.state !== 'normal' && <p className="soft">Do: {alert.action}</p>}
      {alert.state !== 'normal' && (alert.consequence || alert.respondBy) && (
        <p className="soft small">
          {alert.consequence && `If nothing is done: ${alert.consequence}`}
          {alert.respondBy && (
            <>
              {' '}
              Respond by <SiteTime at={alert.respondBy} timeZone={alert.timeZone} />.
            </>
          )}
        </p>
      )}
      <Marks alert={alert} />
      {told.length > 0 && (
        <ul className={classes.told} aria-label="Who was told">
          {told.map(({ at, action, note }, i) => (
            <li key={i}>
              {action === 'told' ? `Told: ${note}` : note}, <SiteTime at={at} timeZone={alert.timeZone} />
            </li>
          ))}
        </ul>
      )}
      {kept && (
        <p role="status" style={{ fontWeight: 560 }}>
          Your acknowledgement is kept here and goes out when the connection is back.
        </p>
      )}
      {refusal && (
        <p role="alert" className={classes.refusal}>
          {refusal.message}
        </p>
      )}
      <div className={classes.actions}>
        {allowed && acknowledgeable && !kept && (
          <Button size="lg" loading={take.isPending} onClick={() => take.mutate()}>
            Acknowledge
          </Button>
        )}
        {allowed && shelvable && (
          <Button size="lg" variant="outline" onClick={() => setShelving(true)}>
            Shelve …
          </Button>
        )}
        {allowed && alert.state === 'shelved' && (
          <Button
            size="lg"
            variant="outline"
            loading={unshelving.isPending}
            onClick={() => unshelving.mutate()}
          >
            Take off the shelf
          </Button>
        )}
        {alert.proposalId !== null && (
          <Button size="lg" variant="outline" component={Link} to={`/proposals/${alert.proposalId}`}>
            Open proposal
          </Button>
        )}
        {(detailed || alert.proposalId === null) && (
          <Button size="lg" variant="default" component={Link} to={`/axes/${alert.axisId}`}>
            Open axis
          </Button>
        )}
      </div>
      {detailed && <Service alert={alert} />}
      {shelving && <ShelveDialog alert={alert} onClose={() => setShelving(false)} />}
    </article>
  );
}

/** What makes an alert worth less than it should be. */
function Marks({ alert: { chattering, stale, levelUnknownSince, timeZone } }: { alert: Alert }) {
  if (!chattering && !stale && !levelUnknownSince) return null;
  return (
    <ul className={classes.told} aria-label="Marks">
      {chattering && <li>Chattering: it comes and goes</li>}
      {stale && <li>Stale: it has stood for more than a day</li>}
      {levelUnknownSince && (
        <li>
          Not measured since <SiteTime at={levelUnknownSince} timeZone={timeZone} />
        </li>
      )}
    </ul>
  );
}
