import { Button, CopyButton } from '@mantine/core';
import { useDebouncedCallback } from '@mantine/hooks';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { Link, useNavigate, useParams, useSearchParams } from 'react-router-dom';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { ErrorState, Waiting } from '../../components/notices';
import { axisQuery } from '../axis/axis-api';
import type { Axis } from '../fleet/fleet-api';
import { Bench, ResetBench } from './bench';
import { proposeTried } from './bench-api';
import { benchStart, readBench, writeBench, type BenchState } from './bench-state';

/** How long the link waits for a hand that still drags, ms. */
const LINK_AFTER = 250;

export function Component() {
  const id = Number(useParams().id);
  const { data: axis, error, isPending, refetch } = useQuery(axisQuery(id));
  if (error && !axis) return <ErrorState error={error} what={`Axis ${id}`} onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[60, 260, 400]} />;
  return <BenchOf key={id} axis={axis} />;
}

function BenchOf({ axis }: { axis: Axis }) {
  const { user } = useSession();
  const navigate = useNavigate();
  const [search, setSearch] = useSearchParams();
  const [state, setState] = useState(() => readBench(benchStart(axis), search));
  const link = useDebouncedCallback(
    (next: BenchState) => setSearch(writeBench(next), { replace: true, preventScrollReset: true }),
    LINK_AFTER,
  );
  const change = (part: Partial<BenchState>): void => {
    const next = { ...state, ...part };
    setState(next);
    link(next);
  };
  const propose = useMutation({
    mutationFn: () => proposeTried(axis, state),
    onSuccess: ({ id }) => navigate(`/proposals/${id}`),
  });
  return (
    <>
      <title>{`Bench ${axis.tag} · Polewright`}</title>
      <div className="soft small">
        <Link to="/">Fleet</Link> / {axis.siteName} / {axis.machineName} /{' '}
        <Link to={`/axes/${axis.id}`}>{axis.tag}</Link>
      </div>
      <div
        style={{
          display: 'flex',
          flexWrap: 'wrap',
          gap: '10px 24px',
          alignItems: 'center',
          margin: '14px 0 18px',
        }}
      >
        <h1 style={{ margin: 0 }}>Bench: {axis.tag}</h1>
        <span className="soft" style={{ flex: '1 1 260px' }}>
          {axis.name}; runs {axis.structure} at λ {axis.lambda.toFixed(1)} rad/s, revision {axis.revision}
        </span>
        {may(user, 'proposal.work', axis.siteId) &&
          (axis.openProposal ? (
            <Link to={`/proposals/${axis.openProposal.id}`}>
              Retune {axis.openProposal.id} is {axis.openProposal.state}
            </Link>
          ) : (
            axis.estimate && (
              <Button loading={propose.isPending} onClick={() => propose.mutate()}>
                Propose these gains
              </Button>
            )
          ))}
        {propose.error && (
          <p role="alert" style={{ color: 'var(--out)', width: '100%', margin: 0 }}>
            {propose.error.message}
          </p>
        )}
      </div>
      <Bench
        axis={axis}
        state={state}
        onChange={change}
        actions={
          <div style={{ display: 'flex', gap: 8 }} className="no-print">
            <ResetBench onReset={() => change(benchStart(axis))} />
            <CopyButton value={`${window.location.origin}/axes/${axis.id}/bench?${writeBench(state)}`}>
              {({ copied, copy }) => (
                <Button variant="default" size="xs" onClick={copy}>
                  {copied ? 'Link copied' : 'Copy link'}
                </Button>
              )}
            </CopyButton>
          </div>
        }
      />
    </>
  );
}
