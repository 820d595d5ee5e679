import { SegmentedControl } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { Link } from 'react-router-dom';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';
import { proposalsQuery, type ProposalSummary } from './proposals-api';

/** Who or what a proposal waits for. */
const WAITS_FOR: Partial<Record<ProposalSummary['state'], string>> = {
  drafted: 'an engineer to look and send it for review',
  'in review': 'an approver',
  approved: 'a maintenance window',
  scheduled: 'its maintenance window',
  applying: 'the machine’s read-back',
  'on trial': 'an engineer to judge the trial',
};

export function Component() {
  const [show, setShow] = useState<'open' | 'all'>('open');
  const { data, error, isPending, refetch } = useQuery(
    proposalsQuery(show === 'open' ? { state: 'open' } : {}),
  );
  return (
    <>
      <title>Proposals · Polewright</title>
      <div style={{ display: 'flex', alignItems: 'baseline', gap: 18, flexWrap: 'wrap', marginBottom: 18 }}>
        <h1>Proposals</h1>
        <span style={{ flex: 1 }} />
        <Link to="/proposals/checklists" className="small">
          Checklists at the machine
        </Link>
        <SegmentedControl
          size="xs"
          aria-label="Which proposals"
          value={show}
          onChange={setShow}
          data={[
            { value: 'open', label: 'open' },
            { value: 'all', label: 'all' },
          ]}
        />
      </div>
      {error && !data ? (
        <ErrorState error={error} what="The proposals" onRetry={() => void refetch()} />
      ) : isPending ? (
        <Waiting heights={[90, 90, 90]} />
      ) : data.items.length === 0 ? (
        <EmptyState title={show === 'open' ? 'No open proposals' : 'No proposals yet'}>
          A proposal appears by itself when drift beyond tolerance is decided; an engineer can also start one
          on an axis’s page.
        </EmptyState>
      ) : (
        <div style={{ display: 'grid', gap: 14, maxWidth: 1100 }}>
          {data.items.map((proposal) => (
            <Summary key={proposal.id} proposal={proposal} />
          ))}
        </div>
      )}
    </>
  );
}

function Summary({ proposal }: { proposal: ProposalSummary }) {
  const {
    id,
    axisTag,
    machineName,
    siteName,
    state,
    probableCause,
    noGainsReason,
    createdAt,
    timeZone,
    trial,
  } = proposal;
  return (
    <article className="card" style={{ padding: '14px 18px' }}>
      <div style={{ display: 'flex', gap: 12, alignItems: 'baseline', flexWrap: 'wrap' }}>
        <Link to={`/proposals/${id}`} style={{ fontWeight: 640, fontSize: 16, color: 'var(--ink)' }}>
          {id} · Retune {axisTag}
        </Link>
        <span className="soft small">
          {machineName}, {siteName}
        </span>
        <span style={{ flex: 1 }} />
        <b style={{ fontWeight: 600 }}>{state}</b>
      </div>
      <div style={{ marginTop: 4 }}>{noGainsReason ?? probableCause?.sentence ?? 'Started by a person.'}</div>
      <div className="soft small" style={{ marginTop: 4 }}>
        <SiteTime at={createdAt} timeZone={timeZone} />
        {WAITS_FOR[state] && `, waits for ${WAITS_FOR[state]}`}
        {trial && state === 'on trial' && `. ${trial.sentence}`}
      </div>
    </article>
  );
}
