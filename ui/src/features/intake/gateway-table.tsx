import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import type { GatewayIntake } from './intake-api';
import classes from './intake.module.css';
import { clockWords, perSecond, seconds } from './intake-words';

const VIA = { socket: 'connected', http: 'connected by HTTP' } as const;

export function GatewayTable({
  gateways,
  sites,
}: {
  gateways: GatewayIntake[];
  sites: { id: number; name: string; timeZone: string }[];
}) {
  return (
    <ScrollX label="Gateways">
      <table className={`plain-table ${classes.gateways}`}>
        <thead>
          <tr>
            <th>Gateway</th>
            <th>Last seen</th>
            <th>Axes</th>
            <th>Messages/s</th>
            <th>Samples/s</th>
            <th>Newest sample</th>
            <th>Clock</th>
            <th>Gaps</th>
            <th>Not taken</th>
          </tr>
        </thead>
        <tbody>
          {gateways.map((gateway) => {
            const site = sites.find(({ id }) => id === gateway.siteId);
            return (
              <tr key={gateway.id}>
                <th scope="row">
                  {gateway.name}
                  <div className="small soft">
                    {site?.name}, {gateway.via ? VIA[gateway.via] : <b>not connected</b>}
                  </div>
                </th>
                <td className="nowrap">
                  {gateway.lastSeenAt && site ? (
                    <SiteTime at={gateway.lastSeenAt} timeZone={site.timeZone} relative />
                  ) : (
                    'never'
                  )}
                </td>
                <td>{gateway.axes}</td>
                <td>{perSecond(gateway.messagesPerSecond)}</td>
                <td>{perSecond(gateway.samplesPerSecond)}</td>
                <td className="nowrap">{ageWords(gateway.lag)}</td>
                <td>{clockWords(gateway) ?? '–'}</td>
                <td>{gateway.gaps}</td>
                <td>
                  <NotTaken gateway={gateway} />
                </td>
              </tr>
            );
          })}
        </tbody>
      </table>
    </ScrollX>
  );
}

const ageWords = (lag: number | null): string =>
  lag === null ? '–' : lag < 0 ? `${seconds(-lag)} ahead` : `${seconds(lag)} old`;

/** Refusals by reason, and what was left out because it had come before. */
function NotTaken({ gateway: { refusals, duplicates, droppedSamples } }: { gateway: GatewayIntake }) {
  const parts = [
    ...refusals.map(({ reason, count }) => `${count} × ${reason}`),
    ...(duplicates > 0 ? [`${duplicates} sent twice`] : []),
    ...(droppedSamples > 0 ? [`${droppedSamples} samples out of time`] : []),
  ];
  if (parts.length === 0) return <>none</>;
  return parts.map((part) => (
    <div key={part} className="nowrap">
      {part}
    </div>
  ));
}
