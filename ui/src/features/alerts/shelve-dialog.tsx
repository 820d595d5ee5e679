import { SegmentedControl, Textarea } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { shelve, type Alert } from './alerts-api';

const HOURS = [
  { value: '1', label: '1 h' },
  { value: '8', label: '8 h' },
  { value: '24', label: '1 day' },
  { value: '168', label: '7 days' },
];

/** A shelf always has an end and a reason. */
export function ShelveDialog({ alert, onClose }: { alert: Alert; onClose: () => void }) {
  const [hours, setHours] = useState('8');
  const [reason, setReason] = useState('');
  const put = useMutation({
    mutationFn: () => shelve(alert.id, new Date(Date.now() + Number(hours) * 3_600_000), reason.trim()),
    onSuccess: onClose,
  });
  return (
    <ConfirmDialog
      opened
      title={`Shelve: ${alert.axisTag}, ${alert.title}`}
      confirmLabel="Shelve it"
      disabled={!reason.trim()}
      loading={put.isPending}
      problem={put.error?.message ?? null}
      onConfirm={() => put.mutate()}
      onClose={onClose}
    >
      <p style={{ marginTop: 0 }}>
        Nobody is told about it until then; afterwards it comes back by itself if it still holds.
      </p>
      <SegmentedControl fullWidth aria-label="For how long" value={hours} onChange={setHours} data={HOURS} />
      <Textarea
        label="Reason"
        required
        mt="md"
        autosize
        minRows={2}
        maxLength={2000}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}
