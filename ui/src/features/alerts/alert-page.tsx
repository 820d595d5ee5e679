import { Button, Textarea } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { Link, useParams } from 'react-router-dom';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';
import { AlertCard } from './alert-card';
import classes from './alerts.module.css';
import { addNote, alertQuery, type Alert } from './alerts-api';

export function Component() {
  const id = Number(useParams().id);
  const { data: alert, error, isPending, refetch } = useQuery(alertQuery(id));
  if (error && !alert)
    return <ErrorState error={error} what={`Alert ${id}`} onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[24, 300, 200]} />;
  return (
    <div style={{ maxWidth: 720, display: 'grid', gap: 24 }}>
      <title>{`${alert.axisTag}: ${alert.title} · Polewright`}</title>
      <div className="soft small">
        <Link to="/alerts">Alerts</Link> / {id}
      </div>
      <h1 className="visually-hidden">
        Alert {id}: {alert.axisTag}, {alert.title}
      </h1>
      <AlertCard alert={alert} detailed />
      <Card title="What happened" sub="oldest first">
        <ol className={classes.events}>
          {alert.events.map((event, i) => (
            <li key={i}>
              <span className="soft small">
                <SiteTime at={event.at} timeZone={alert.timeZone} />
              </span>{' '}
              <b style={{ fontWeight: 600 }}>{event.action}</b> by {event.by}
              {event.note && <div className="small">{event.note}</div>}
            </li>
          ))}
        </ol>
        <Note alert={alert} />
      </Card>
    </div>
  );
}

function Note({ alert }: { alert: Alert }) {
  const { user } = useSession();
  const [text, setText] = useState('');
  const add = useMutation({ mutationFn: () => addNote(alert.id, text.trim()), onSuccess: () => setText('') });
  if (!may(user, 'alert.acknowledge', alert.siteId)) return null;
  return (
    <form
      style={{ marginTop: 16, display: 'grid', gap: 10 }}
      onSubmit={(event) => {
        event.preventDefault();
        add.mutate();
      }}
    >
      <Textarea
        label="Note"
        autosize
        minRows={2}
        maxLength={2000}
        value={text}
        onChange={(event) => setText(event.currentTarget.value)}
      />
      {add.error && (
        <p role="alert" className={classes.refusal} style={{ margin: 0 }}>
          {add.error.message}
        </p>
      )}
      <Button
        type="submit"
        variant="outline"
        disabled={!text.trim()}
        loading={add.isPending}
        style={{ justifySelf: 'start' }}
      >
        Add the note
      </Button>
    </form>
  );
}
