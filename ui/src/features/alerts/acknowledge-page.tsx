import { Button } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { Link, useParams } from 'react-router-dom';
import { Problem } from '../../api/client';
import { ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';
import { StateEdge } from '../../components/state-edge';
import { acknowledgeByLink, linkQuery, type AcknowledgeLink } from './alerts-api';
import classes from './alerts.module.css';

/** Where the link of an alert's mail leads: it asks once more, and needs no sign-in. */
export function Component() {
  const token = useParams().token ?? '';
  const { data: link, error, isPending, refetch } = useQuery(linkQuery(token));
  return (
    <main className={classes.linkPage}>
      <title>Acknowledge · Polewright</title>
      {error && !link && <ErrorState error={error} what="This link" onRetry={() => void refetch()} />}
      {isPending && <Waiting heights={[320]} />}
      {link && <Acknowledgement token={token} link={link} />}
    </main>
  );
}

function Acknowledgement({ token, link }: { token: string; link: AcknowledgeLink }) {
  const take = useMutation({ mutationFn: () => acknowledgeByLink(token) });
  // Without an answer it may or may not have arrived: the same button asks again, and the service counts it once.
  const unanswered = take.error && !(take.error instanceof Problem);
  return (
    <article className={classes.card}>
      <StateEdge state={link.state === 'open' ? 'out-of-tune' : 'in-tune'} />
      <h1 style={{ fontSize: 21 }}>
        {link.axisTag}: {link.title}
      </h1>
      <div className={classes.meta}>
        {link.axisName}, {link.machineName}, {link.siteName}. Priority {link.priority}, since{' '}
        <SiteTime at={link.raisedAt} timeZone={link.timeZone} />
      </div>
      <p style={{ fontWeight: 560 }}>{link.message}</p>
      <p className="soft">Do: {link.action}</p>
      <div role="status">
        {link.acknowledgedBy && link.acknowledgedAt && (
          <p style={{ fontWeight: 600 }}>
            Acknowledged by {link.acknowledgedBy},{' '}
            <SiteTime at={link.acknowledgedAt} timeZone={link.timeZone} />.
          </p>
        )}
        {link.state === 'used' && !link.acknowledgedBy && <p>This link was used already.</p>}
        {link.state === 'expired' && (
          <p>This link has expired. Open the alert and sign in to acknowledge it.</p>
        )}
        {link.state === 'over' && !link.acknowledgedBy && <p>This alert no longer waits for anybody.</p>}
      </div>
      {take.error && (
        <p role="alert" className={classes.refusal}>
          {unanswered
            ? 'The service did not answer; nothing is known to have changed. Try again.'
            : take.error.message}
        </p>
      )}
      {link.state === 'open' && (
        <Button size="xl" fullWidth loading={take.isPending} onClick={() => take.mutate()}>
          Acknowledge as {link.person}
        </Button>
      )}
      <p style={{ margin: '14px 0 0' }}>
        <Link to={`/alerts/${link.alertId}`} className={classes.linkOut}>
          Open the alert
        </Link>
      </p>
    </article>
  );
}
