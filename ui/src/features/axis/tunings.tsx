import { Button } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { Link, useNavigate } from 'react-router-dom';
import { saveFile } from '../../api/download';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { significant } from '../../components/quantity';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import type { Axis } from '../fleet/fleet-api';
import { proposeAgain, saveTuningsCsv, tuningsQuery, type Tuning } from './axis-api';

/** Every set of gains that the axis has run with. */
export function Tunings({ axis }: { axis: Axis }) {
  const { data } = useQuery(tuningsQuery(axis.id));
  const { user } = useSession();
  const navigate = useNavigate();
  const restore = useMutation({
    mutationFn: (tuning: Tuning) => proposeAgain(axis.id, tuning),
    onSuccess: ({ id }) => navigate(`/proposals/${id}`),
  });
  const save = useMutation({ mutationFn: () => saveTuningsCsv(axis) });
  const problem = restore.error ?? save.error;
  const restorable = may(user, 'proposal.work', axis.siteId) && !axis.openProposal && axis.estimate !== null;
  return (
    <Card
      title="Tuning revisions"
      sub="newest first; Kp %/mm, Ki %/(mm·s), Kd %·s/mm"
      aside={
        <span className="no-print" style={{ display: 'flex', gap: 8 }}>
          <Button size="compact-sm" variant="default" loading={save.isPending} onClick={() => save.mutate()}>
            CSV
          </Button>
          <Button
            size="compact-sm"
            variant="default"
            disabled={!data}
            onClick={() =>
              saveFile(
                new Blob([JSON.stringify(data?.items, null, 2)], { type: 'application/json' }),
                `${axis.tag} tunings.json`,
              )
            }
          >
            JSON
          </Button>
        </span>
      }
    >
      {problem && (
        <p role="alert" style={{ color: 'var(--out)' }}>
          {problem.message}
        </p>
      )}
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
              {restorable && <th className="no-print">Restore</th>}
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
                {restorable && (
                  <td className="no-print">
                    {!tuning.current && (
                      <Button
                        size="compact-sm"
                        variant="default"
                        aria-label={`Propose revision ${tuning.revision} again`}
                        loading={restore.isPending && restore.variables === tuning}
                        onClick={() => restore.mutate(tuning)}
                      >
                        Propose
                      </Button>
                    )}
                  </td>
                )}
              </tr>
            ))}
          </tbody>
        </table>
      </ScrollX>
    </Card>
  );
}
