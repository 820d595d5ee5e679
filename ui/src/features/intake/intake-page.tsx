import { useQuery } from '@tanstack/react-query';
import { may } from '../../api/policy';
import { sitesQuery } from '../../api/sites';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { OWN_ZONE } from '../people/people-api';
import { SiteTime } from '../../components/site-time';
import { GatewayTable } from './gateway-table';
import { intakeQuery, type Intake } from './intake-api';
import classes from './intake.module.css';
import { bytes, concerns, perSecond, seconds } from './intake-words';

export function Component() {
  const { user } = useSession();
  return (
    <>
      <title>Intake · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>Intake</h1>
      {may(user, 'intake.read') ? (
        <IntakeNow />
      ) : (
        <EmptyState title="The intake is for engineers and administrators">
          Ask one of your site how the gateways fare.
        </EmptyState>
      )}
    </>
  );
}

function IntakeNow() {
  const intake = useQuery(intakeQuery);
  const sites = useQuery(sitesQuery);
  const error = intake.error ?? sites.error;
  if (error && !(intake.data && sites.data))
    return (
      <ErrorState
        error={error}
        what="The intake"
        onRetry={() => {
          void intake.refetch();
          void sites.refetch();
        }}
      />
    );
  if (!intake.data || !sites.data) return <Waiting heights={[150, 260]} />;
  const { data } = intake;
  const count = data.gateways.length;
  return (
    <div className={classes.page}>
      <Card title="The service" sub="what waits, and how what came is written down">
        <Figures intake={data} />
        <Concerns found={concerns(data)} />
      </Card>
      <Card
        title={count === 1 ? '1 gateway' : `${count} gateways`}
        sub={
          <>
            counted since the service started, <SiteTime at={data.since} timeZone={OWN_ZONE} />; rates over
            the last ten seconds
          </>
        }
      >
        {count === 0 ? (
          <p className="soft">No gateway is registered on your sites yet.</p>
        ) : (
          <GatewayTable gateways={data.gateways} sites={sites.data.items} />
        )}
      </Card>
    </div>
  );
}

function Figures({ intake }: { intake: Intake }) {
  const samples = intake.gateways.reduce((sum, { samplesPerSecond }) => sum + samplesPerSecond, 0);
  const figures = [
    ['Samples a second', perSecond(samples)],
    ['Longest wait of a message', seconds(intake.lag)],
    ['Messages that wait', `${intake.queueMessages} (${bytes(intake.queueBytes)})`],
    ['Last checkpoint took', intake.lastCheckpoint === null ? 'none yet' : seconds(intake.lastCheckpoint)],
    ['Longest checkpoint', seconds(intake.longestCheckpoint)],
  ];
  return (
    <dl className={classes.figures}>
      {figures.map(([name, value]) => (
        <div key={name}>
          <dt>{name}</dt>
          <dd>{value}</dd>
        </div>
      ))}
    </dl>
  );
}

/** Read out only when it changes: the figures beside it change all the time. */
function Concerns({ found }: { found: string[] }) {
  return (
    <div role="status" className={classes.concerns}>
      {found.length === 0 ? (
        <p className="soft">Everything that comes is taken in time.</p>
      ) : (
        <ul>
          {found.map((text) => (
            <li key={text}>{text}</li>
          ))}
        </ul>
      )}
    </div>
  );
}
