import { Button, Textarea } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { Waiting } from '../../components/notices';
import { axisQuery } from '../axis/axis-api';
import { Bench, ResetBench } from '../bench/bench';
import { benchStart, patternOf } from '../bench/bench-state';
import type { Axis } from '../fleet/fleet-api';
import { alter, type Proposal } from './proposals-api';

/** The bench on the proposal's own evidence: what is tried there can become its next version. */
export function ProposalBench({ proposal }: { proposal: Proposal }) {
  const { data: axis } = useQuery(axisQuery(proposal.axisId));
  if (!axis) return <Waiting heights={[260, 400]} />;
  return <BenchOfVersion key={proposal.version} axis={atVersion(axis, proposal)} proposal={proposal} />;
}

/** The axis as the evidence froze it, with the poles of the present version. */
function atVersion(axis: Axis, { evidence, proposed, current, binding }: Proposal): Axis {
  const { estimate, tolerances, move } = evidence;
  const tuning = proposed ?? current;
  return {
    ...axis,
    estimate,
    tolerances,
    move,
    gains: current.gains,
    structure: tuning.structure,
    feedForward: tuning.feedForward,
    pattern: tuning.pattern ?? axis.pattern,
    lambda: tuning.lambda ?? binding?.commissionedLambda ?? axis.lambda,
  };
}

function BenchOfVersion({ axis, proposal }: { axis: Axis; proposal: Proposal }) {
  const [state, setState] = useState(() => benchStart(axis));
  const [note, setNote] = useState('');
  const change = useMutation({
    mutationFn: () =>
      alter(proposal, {
        structure: state.structure,
        feedForward: state.feedForward,
        pattern: patternOf(state),
        ...(note.trim() && { note: note.trim() }),
      }),
  });
  return (
    <section aria-label="Bench" className="no-print" style={{ marginTop: 28 }}>
      <h2 style={{ fontSize: 20, margin: '0 0 4px' }}>Bench</h2>
      <p className="soft" style={{ margin: '0 0 14px' }}>
        Try other poles on the plant as the evidence has it. Nothing changes until you make a version; a new
        version wants review again.
      </p>
      <Bench
        axis={axis}
        state={state}
        onChange={(part) => setState((former) => ({ ...former, ...part }))}
        actions={<ResetBench onReset={() => setState(benchStart(axis))} />}
      />
      <form
        className="card"
        style={{ marginTop: 18, display: 'grid', gap: 12 }}
        onSubmit={(event) => {
          event.preventDefault();
          change.mutate();
        }}
      >
        <Textarea
          label="Why"
          description="what the reviewer should know"
          autosize
          minRows={2}
          maxLength={2000}
          value={note}
          onChange={(event) => setNote(event.currentTarget.value)}
        />
        {change.error && (
          <p role="alert" style={{ color: 'var(--out)', margin: 0 }}>
            {change.error.message}
          </p>
        )}
        <Button type="submit" variant="outline" loading={change.isPending} style={{ justifySelf: 'start' }}>
          Make version {proposal.version + 1} of it
        </Button>
      </form>
    </section>
  );
}
