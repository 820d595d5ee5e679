import { Button } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { Link, useParams } from 'react-router-dom';
import { Caution } from '../../components/caution';
import { ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';
import { Discussion, Versions } from './discussion';
import { ProposalBench } from './proposal-bench';
import { ProposalActions } from './proposal-actions';
import { ProbableCause, Record, Trial, WhatBinds, WhatChanges, WhatToExpect, Why } from './proposal-cards';
import classes from './proposal-page.module.css';
import { ProposalSteps } from './proposal-steps';
import { proposalQuery, saveReport } from './proposals-api';

export function Component() {
  const id = Number(useParams().id);
  const { data: proposal, error, isPending, refetch } = useQuery(proposalQuery(id));
  const report = useMutation({ mutationFn: saveReport });
  if (error && !proposal)
    return <ErrorState error={error} what={`Proposal ${id}`} onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[70, 60, 420]} />;
  const {
    axisId,
    axisTag,
    axisName,
    machineName,
    siteName,
    timeZone,
    source,
    createdAt,
    version,
    alteredBy,
  } = proposal;
  return (
    <>
      <title>{`Retune ${axisTag} · Polewright`}</title>
      <div className="soft small">
        <Link to="/proposals">Proposals</Link> / {id}
      </div>
      <div className={classes.heading}>
        <h1>
          Retune{' '}
          <Link to={`/axes/${axisId}`} style={{ color: 'inherit' }}>
            {axisTag}
          </Link>
        </h1>
        <span className="soft">
          {axisName}, {machineName}, {siteName}. Made from {source === 'drift' ? 'drift' : 'a wish'}{' '}
          <SiteTime at={createdAt} timeZone={timeZone} />, version {version}
          {alteredBy && ` by ${alteredBy.name}`}
        </span>
        <span style={{ flex: 1 }} />
        <Button
          variant="default"
          className="no-print"
          loading={report.isPending}
          onClick={() => report.mutate(id)}
        >
          PDF
        </Button>
        <ProposalActions proposal={proposal} />
      </div>
      <ProposalSteps proposal={proposal} />
      <Caution>
        Nothing is sent before a scheduled window, an axis in maintenance and at rest, and a signed checklist.
      </Caution>
      {proposal.restoring && (
        <div className="card" role="status" style={{ marginTop: 20, borderColor: 'var(--out)' }}>
          <h2>Not known what {axisTag} runs with</h2>
          <p style={{ margin: '6px 0 0' }}>
            Gains left and were not read back. Those of the running revision are asked for again until the
            machine reads them back; the axis stays in maintenance until then. Look at the controller itself.
          </p>
        </div>
      )}
      {proposal.noGainsReason && (
        <div className="card" style={{ marginTop: 20, borderColor: 'var(--out)' }}>
          <h2>No gains are proposed</h2>
          <p style={{ margin: '6px 0 0' }}>{proposal.noGainsReason}</p>
        </div>
      )}
      <div className={classes.grid}>
        <div className={classes.column}>
          {proposal.trial && <Trial trial={proposal.trial} />}
          <Why proposal={proposal} />
          {proposal.probableCause && <ProbableCause cause={proposal.probableCause} />}
          <WhatChanges proposal={proposal} />
        </div>
        <div className={classes.column}>
          <WhatToExpect proposal={proposal} />
          {proposal.binding && <WhatBinds binding={proposal.binding} />}
        </div>
        <div className={classes.column}>
          <Discussion proposal={proposal} />
          <Versions proposal={proposal} />
          <Record proposal={proposal} />
        </div>
      </div>
      {proposal.actions.includes('alter') && <ProposalBench proposal={proposal} />}
    </>
  );
}
