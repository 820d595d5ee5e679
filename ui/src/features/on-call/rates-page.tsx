import { SegmentedControl, Select } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import { Link, useSearchParams } from 'react-router-dom';
import { sitesQuery } from '../../api/sites';
import { DayBars } from '../../charts/day-bars';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import { ratesQuery, type Rates } from './on-call-api';
import classes from './on-call.module.css';

const SPANS = ['1', '7', '30', '90'];

/** How many alerts come, to whom, and how long they wait, beside the published figures. */
export function Component() {
  const [search, setSearch] = useSearchParams();
  const { data: sites, error, isPending, refetch } = useQuery(sitesQuery);
  const first = sites?.items[0];
  const siteId = Number(search.get('site')) || first?.id;
  const days = SPANS.includes(search.get('days') ?? '') ? search.get('days')! : '30';
  const show = (change: Record<string, string>): void =>
    setSearch((former) => ({ ...Object.fromEntries(former), ...change }), { replace: true });
  return (
    <>
      <title>Alert rates · Polewright</title>
      <div className="soft small">
        <Link to="/alerts">Alerts</Link> / rates
      </div>
      <div className={classes.head}>
        <h1>Alert rates</h1>
        <div className={classes.choices}>
          {sites && sites.items.length > 1 && (
            <Select
              size="xs"
              w={150}
              aria-label="Site"
              allowDeselect={false}
              value={String(siteId)}
              onChange={(value) => value && show({ site: value })}
              data={sites.items.map(({ id, name }) => ({ value: String(id), label: name }))}
            />
          )}
          <SegmentedControl
            size="xs"
            aria-label="Over"
            value={days}
            onChange={(value) => show({ days: value })}
            data={SPANS.map((value) => ({ value, label: value === '1' ? '1 day' : `${value} days` }))}
          />
        </div>
      </div>
      {error && !sites && <ErrorState error={error} what="The rates" onRetry={() => void refetch()} />}
      {isPending && <Waiting heights={[300, 300]} />}
      {sites && !first && (
        <EmptyState title="No site yet">Rates belong to a site; an administrator adds the first.</EmptyState>
      )}
      {siteId !== undefined && <SiteRates siteId={siteId} days={Number(days)} />}
    </>
  );
}

function SiteRates({ siteId, days }: { siteId: number; days: number }) {
  const { data: rates, error, isPending, refetch } = useQuery(ratesQuery(siteId, days));
  if (error && !rates) return <ErrorState error={error} what="The rates" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[300, 300]} />;
  const { published, timeZone } = rates;
  return (
    <div className={classes.columns}>
      <Card
        title="Alerts a day"
        sub={`${rates.alerts} in ${days === 1 ? 'a day' : `${days} days`}, ${rates.perDay.toFixed(1)} a day; for one person about ${published.acceptablePerDay} a day is acceptable, ${published.manageablePerDay} the most that can be managed (${published.source})`}
      >
        <DayBars days={rates.days} published={published} />
      </Card>
      <Card title="By person on call" sub="by the rota as it is written now">
        <PeopleTable people={rates.people} />
      </Card>
      <Card
        title={`Floods (${rates.floods.length})`}
        sub={`more than ${published.floodAlerts} alerts in ten minutes (${published.source}); ${rates.floodPct.toFixed(rates.floodPct < 1 ? 2 : 1)} % of the time`}
      >
        {rates.floods.length === 0 && <p className="soft">None.</p>}
        <ul className={classes.list}>
          {rates.floods.map((flood) => (
            <li key={flood.from}>
              <SiteTime at={flood.from} timeZone={timeZone} /> to{' '}
              <SiteTime at={flood.to} timeZone={timeZone} />: {flood.alerts} alerts
            </li>
          ))}
        </ul>
      </Card>
      <Card title="Time to acknowledge">
        <AcknowledgeTable acknowledging={rates.acknowledging} />
      </Card>
      <Card title="The ten most frequent">
        <KindTable kinds={rates.frequent} label="The ten most frequent" />
      </Card>
      <Card title={`Chattering (${rates.chattering.length})`} sub="came three times or more within a minute">
        <KindTable kinds={rates.chattering} label="Chattering" />
      </Card>
      <Card title={`Standing (${rates.standing.length})`} sub="for more than a day">
        {rates.standing.length === 0 && <p className="soft">None.</p>}
        <ul className={classes.list}>
          {rates.standing.map((alert) => (
            <li key={alert.alertId}>
              <Link to={`/alerts/${alert.alertId}`}>
                {alert.axisTag}: {alert.title}
              </Link>
              , {alert.state}, since <SiteTime at={alert.raisedAt} timeZone={timeZone} />
            </li>
          ))}
        </ul>
      </Card>
    </div>
  );
}

function PeopleTable({ people }: { people: Rates['people'] }) {
  return (
    <ScrollX label="Alerts by person on call">
      <table className="plain-table">
        <thead>
          <tr>
            <th>Who</th>
            <th>On call, h</th>
            <th>Alerts</th>
            <th>A day</th>
            <th>Busiest day</th>
            <th>That is</th>
          </tr>
        </thead>
        <tbody>
          {people.map((person) => (
            <tr key={person.userId ?? 'nobody'}>
              <td className={person.userId === null ? classes.out : undefined}>{person.name}</td>
              <td>{person.hoursOnCall.toFixed(0)}</td>
              <td>{person.alerts}</td>
              <td>{person.perDay.toFixed(1)}</td>
              <td>{person.busiestDay}</td>
              <td className={person.load === 'too many' ? classes.out : undefined}>{person.load}</td>
            </tr>
          ))}
        </tbody>
      </table>
    </ScrollX>
  );
}

/** 45 s, 12 min, 3.4 h. */
function lasting(seconds: number | null): string {
  if (seconds === null) return '–';
  if (seconds < 90) return `${seconds.toFixed(0)} s`;
  return seconds < 5_400 ? `${(seconds / 60).toFixed(0)} min` : `${(seconds / 3_600).toFixed(1)} h`;
}

function AcknowledgeTable({ acknowledging }: { acknowledging: Rates['acknowledging'] }) {
  return (
    <ScrollX label="Time to acknowledge">
      <table className="plain-table">
        <thead>
          <tr>
            <th>Priority</th>
            <th>Alerts</th>
            <th>Half within</th>
            <th>Nine of ten within</th>
            <th>Unanswered</th>
          </tr>
        </thead>
        <tbody>
          {acknowledging.map((row) => (
            <tr key={row.priority}>
              <td>{row.priority}</td>
              <td>{row.alerts}</td>
              <td>{lasting(row.medianSeconds)}</td>
              <td>{lasting(row.ninthDecileSeconds)}</td>
              <td>{row.unanswered}</td>
            </tr>
          ))}
        </tbody>
      </table>
    </ScrollX>
  );
}

function KindTable({ kinds, label }: { kinds: Rates['frequent']; label: string }) {
  if (kinds.length === 0) return <p className="soft">None.</p>;
  return (
    <ScrollX label={label}>
      <table className="plain-table">
        <thead>
          <tr>
            <th>Alert</th>
            <th>Times</th>
            <th>Share</th>
          </tr>
        </thead>
        <tbody>
          {kinds.map((kind) => (
            <tr key={`${kind.axisId} ${kind.title}`}>
              <td>
                <Link to={`/axes/${kind.axisId}`}>{kind.axisTag}</Link>: {kind.title}
              </td>
              <td>{kind.alerts}</td>
              <td>{kind.sharePct.toFixed(0)} %</td>
            </tr>
          ))}
        </tbody>
      </table>
    </ScrollX>
  );
}
