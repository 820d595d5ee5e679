import { useQuery } from '@tanstack/react-query';
import { Link } from 'react-router-dom';
import { Card } from '../../components/card';
import { significant } from '../../components/quantity';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import type { Axis } from '../fleet/fleet-api';
import { tuningsQuery } from './axis-api';

/** Every set of gains that the axis has run with. */
export function Tunings({ axis }: { axis: Axis }) {
  const { data } = useQuery(tuningsQuery(axis.id));
  return (
    <Card title="Tuning revisions" sub="newest first; Kp %/mm, Ki %/(mm·s), Kd %·s/mm">
      <ScrollX label="Tuning revisions">
        <table className="plain-table">
          <thead>
            <tr>
              <th>No.</th>
              <th style={{ textAlign: 'left' }}>Since</th>
              <th>λ</th>
              <th>Kp</th>
              <th>Ki</th>
              <th>Kd</th>
            </tr>
          </thead>
          <tbody>
            {data?.items.map((tuning) => (
              <tr key={tuning.revision}>
                <td>
                  {tuning.revision}
                  {tuning.current && <b style={{ fontWeight: 600 }}>&nbsp;now</b>}
                </td>
                <td style={{ textAlign: 'left' }}>
                  <SiteTime at={tuning.appliedAt} timeZone={axis.timeZone} /> by {tuning.appliedBy}{' '}
                  <span className="soft small">
                    {tuning.proposalId ? (
                      <Link to={`/proposals/${tuning.proposalId}`}>{tuning.source}</Link>
                    ) : (
                      tuning.source
                    )}
                  </span>
                </td>
                <td>{tuning.lambda?.toFixed(1) ?? '–'}</td>
                <td>{significant(tuning.gains.kp)}</td>
                <td>{significant(tuning.gains.ki)}</td>
                <td>{significant(tuning.gains.kd)}</td>
              </tr>
            ))}
          </tbody>
        </table>
      </ScrollX>
    </Card>
  );
}
