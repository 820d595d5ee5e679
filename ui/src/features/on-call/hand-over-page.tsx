import { Button, Group, TextInput } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import dayjs from 'dayjs';
import { Link, useParams, useSearchParams } from 'react-router-dom';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import { ScrollX } from '../../components/scroll-x';
import { onSite } from '../../components/site-clock';
import { SiteTime } from '../../components/site-time';
import { StateWord } from '../../components/state-glyph';
import { handOverQuery, type HandOver } from './on-call-api';
import classes from './on-call.module.css';

/** What the person on call hands over: a page, and a sheet of paper. */
export function Component() {
  const siteId = Number(useParams().siteId);
  const [search, setSearch] = useSearchParams();
  const from = search.get('from');
  const { data: sheet, error, isPending, refetch } = useQuery(handOverQuery(siteId, from));
  if (error && !sheet)
    return <ErrorState error={error} what="The hand-over sheet" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[60, 240, 240]} />;
  const { timeZone } = sheet;
  return (
    <div className={classes.sheet}>
      <title>{`Hand-over, ${sheet.siteName} · Polewright`}</title>
      <div className="soft small no-print">
        <Link to="/rota">Rota</Link> / hand-over
      </div>
      <header className={classes.head}>
        <div>
          <h1>Hand-over, {sheet.siteName}</h1>
          <p style={{ margin: '4px 0 0' }}>
            {onSite(sheet.from, timeZone).format('ddd D MMM YYYY HH:mm')} to{' '}
            {onSite(sheet.to, timeZone).format('ddd D MMM HH:mm')}, {timeZone}
          </p>
          <p style={{ margin: '2px 0 0' }}>
            {sheet.onCall ? (
              <>
                On call: <b>{sheet.onCall.name}</b> until{' '}
                <SiteTime at={sheet.onCall.until} timeZone={timeZone} />. Then:{' '}
                {sheet.next ? <b>{sheet.next.name}</b> : <b className={classes.out}>nobody</b>}.
              </>
            ) : (
              <b className={classes.out}>Nobody is on call now.</b>
            )}
          </p>
        </div>
        <Group gap={10} align="end" className="no-print">
          <TextInput
            key={sheet.from}
            type="datetime-local"
            label="Since"
            description={`on the clock of ${sheet.siteName}`}
            defaultValue={onSite(sheet.from, timeZone).format('YYYY-MM-DDTHH:mm')}
            onBlur={({ currentTarget: { value } }) => {
              const at = value && dayjs.tz(value, timeZone);
              if (at && at.diff(sheet.from, 'minute') !== 0)
                setSearch({ from: at.toISOString() }, { replace: true });
            }}
          />
          <Button onClick={() => window.print()}>Print</Button>
        </Group>
      </header>
      <AlertsCard
        title={`Open alerts (${sheet.open.length})`}
        none="Nothing stands open."
        alerts={sheet.open}
        timeZone={timeZone}
      />
      <Card title={`Axes not in tune (${sheet.axes.length})`}>
        {sheet.axes.length === 0 && <p className="soft">All axes are in tune.</p>}
        <ul className={classes.list}>
          {sheet.axes.map((axis) => (
            <li key={axis.id}>
              <StateWord state={axis.state} />{' '}
              <Link to={`/axes/${axis.id}`}>
                {axis.tag}, {axis.name}
              </Link>
              : {axis.stateReason}
            </li>
          ))}
        </ul>
      </Card>
      <Card title="Notes of the shift">
        {sheet.notes.length === 0 && <p className="soft">None. They are written on the rota page.</p>}
        {sheet.notes.map((note) => (
          <div key={note.id} className={classes.note}>
            <span className="soft small">
              {note.by}, <SiteTime at={note.at} timeZone={timeZone} />
            </span>
            <div>{note.text}</div>
          </div>
        ))}
      </Card>
      <Card title="What changed in the shift" sub="newest first">
        <Changes sheet={sheet} />
      </Card>
      <AlertsCard
        title={`Came and went in the shift (${sheet.over.length})`}
        none="No alert came and went."
        alerts={sheet.over}
        timeZone={timeZone}
      />
      <p className="small">
        Machines can move unexpectedly. Follow the site’s lockout/tagout and machine-safety procedures and
        local codes. Polewright is not a safety function.
      </p>
    </div>
  );
}

function AlertsCard({
  title,
  none,
  alerts,
  timeZone,
}: {
  title: string;
  none: string;
  alerts: HandOver['open'];
  timeZone: string;
}) {
  return (
    <Card title={title}>
      {alerts.length === 0 && <p className="soft">{none}</p>}
      <ul className={classes.list}>
        {alerts.map((alert) => (
          <li key={alert.id}>
            <Link to={`/alerts/${alert.id}`}>
              {alert.axisTag}: {alert.title}
            </Link>
            , {alert.priority}, {alert.state.replaceAll('-', ' ')}
            {alert.acknowledgedBy && ` (${alert.acknowledgedBy})`}, since{' '}
            <SiteTime at={alert.raisedAt} timeZone={timeZone} />
            <div>{alert.message}</div>
            {alert.shelvedUntil && (
              <div className="soft">
                Shelved until <SiteTime at={alert.shelvedUntil} timeZone={timeZone} />: {alert.shelveReason}
              </div>
            )}
            {alert.state !== 'normal' && <div className="soft">Do: {alert.action}</div>}
          </li>
        ))}
      </ul>
    </Card>
  );
}

function Changes({ sheet: { changes, timeZone } }: { sheet: HandOver }) {
  if (changes.length === 0) return <p className="soft">Nothing was changed.</p>;
  return (
    <ScrollX label="What changed in the shift">
      <table className="plain-table left">
        <thead>
          <tr>
            <th>When</th>
            <th>Who</th>
            <th>What</th>
            <th>Note</th>
          </tr>
        </thead>
        <tbody>
          {changes.map((change, i) => (
            <tr key={i}>
              <td className="nowrap">
                <SiteTime at={change.at} timeZone={timeZone} />
              </td>
              <td>{change.by}</td>
              <td>
                {change.action.split('.').at(-1)?.replaceAll('-', ' ')}: {change.subject}
              </td>
              <td>{change.note}</td>
            </tr>
          ))}
        </tbody>
      </table>
    </ScrollX>
  );
}
