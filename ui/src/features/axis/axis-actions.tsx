import { Button, Select, Textarea } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { Link, useNavigate } from 'react-router-dom';
import { may } from '../../api/policy';
import { queryClient } from '../../api/query-client';
import { useSession } from '../../api/use-session';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { significant } from '../../components/quantity';
import type { Axis } from '../fleet/fleet-api';
import { confirmBaseline, maintain, startProposal } from './axis-api';

const HOURS = { '1': '1 hour', '2': '2 hours', '4': '4 hours', '8': '8 hours' };

/** What this person may do with the axis. */
export function AxisActions({ axis, state }: { axis: Axis; state: Axis['state'] }) {
  const { user } = useSession();
  const navigate = useNavigate();
  const [asking, setAsking] = useState<'maintenance' | 'baseline' | null>(null);
  const refresh = (): Promise<void> => queryClient.invalidateQueries({ queryKey: ['axis', axis.id] });
  const draft = useMutation({
    mutationFn: () => startProposal(axis.id),
    onSuccess: ({ id }) => navigate(`/proposals/${id}`),
  });
  const baseline = useMutation({
    mutationFn: () => confirmBaseline(axis.id),
    onSuccess: () => {
      setAsking(null);
      return refresh();
    },
  });
  const inMaintenance = state === 'in-maintenance';
  return (
    <div className="no-print" style={{ display: 'flex', gap: 10, flexWrap: 'wrap' }}>
      {may(user, 'proposal.work', axis.siteId) && !axis.openProposal && axis.estimate && (
        <Button variant="outline" loading={draft.isPending} onClick={() => draft.mutate()}>
          Start a proposal
        </Button>
      )}
      {axis.gains && (
        <Button component={Link} to={`/axes/${axis.id}/bench`} variant="outline">
          Try gains
        </Button>
      )}
      {may(user, 'axis.maintenance', axis.siteId) && (
        <Button variant={inMaintenance ? 'filled' : 'outline'} onClick={() => setAsking('maintenance')}>
          {inMaintenance ? 'Back into production …' : 'Maintenance …'}
        </Button>
      )}
      {may(user, 'axis.baseline', axis.siteId) && axis.estimate && (
        <Button variant="default" onClick={() => setAsking('baseline')}>
          Take as baseline …
        </Button>
      )}
      {draft.error && (
        <p role="alert" style={{ color: 'var(--out)', width: '100%', margin: 0 }}>
          {draft.error.message}
        </p>
      )}
      {asking === 'maintenance' && (
        <Maintenance axis={axis} on={!inMaintenance} onClose={() => setAsking(null)} onDone={refresh} />
      )}
      {asking === 'baseline' && axis.estimate && (
        <ConfirmDialog
          opened
          title={`Take as baseline: ${axis.tag}`}
          confirmLabel="This is how the axis should be"
          loading={baseline.isPending}
          problem={baseline.error?.message ?? null}
          onConfirm={() => baseline.mutate()}
          onClose={() => setAsking(null)}
        >
          From now on drift is judged against K = {significant(axis.estimate.gain.value)} (mm/s)/% and α ={' '}
          {significant(axis.estimate.pole.value)} rad/s. The control chart learns its spread anew.
        </ConfirmDialog>
      )}
    </div>
  );
}

function Maintenance({
  axis,
  on,
  onClose,
  onDone,
}: {
  axis: Axis;
  on: boolean;
  onClose: () => void;
  onDone: () => Promise<void>;
}) {
  const [reason, setReason] = useState('');
  const [hours, setHours] = useState<string | null>('2');
  const change = useMutation({
    mutationFn: () =>
      maintain(axis.id, {
        on,
        reason: reason.trim(),
        ...(on && hours && { until: new Date(Date.now() + Number(hours) * 3_600_000).toISOString() }),
      }),
    onSuccess: () => {
      onClose();
      return onDone();
    },
  });
  return (
    <ConfirmDialog
      opened
      title={on ? `Maintenance: ${axis.tag}` : `Back into production: ${axis.tag}`}
      confirmLabel={on ? 'Put it in maintenance' : 'Back into production'}
      disabled={!reason.trim()}
      loading={change.isPending}
      problem={change.error?.message ?? null}
      onConfirm={() => change.mutate()}
      onClose={onClose}
    >
      <p style={{ marginTop: 0 }}>
        {on
          ? 'The gateway brings the axis to rest at the end of its move. Alerts are suppressed and nothing is learned from its moves meanwhile. This is not a lockout: follow the site’s own procedures.'
          : 'The axis starts its production program again. Keep people clear: it moves.'}
      </p>
      <Textarea
        label="Reason"
        required
        autosize
        minRows={2}
        maxLength={500}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
      {on && (
        <Select
          label="For"
          mt="sm"
          value={hours}
          onChange={setHours}
          data={Object.entries(HOURS).map(([value, label]) => ({ value, label }))}
          comboboxProps={{ withinPortal: true }}
        />
      )}
    </ConfirmDialog>
  );
}
