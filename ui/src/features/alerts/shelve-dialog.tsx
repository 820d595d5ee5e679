import { SegmentedControl, Textarea, TextInput } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import dayjs from 'dayjs';
import { useState } from 'react';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { SiteTime } from '../../components/site-time';
import { shelve, type Alert } from './alerts-api';

/** Hours; a shift is taken as 8 h (common practice, no source). */
const SPANS = [
  { value: '1', label: '1 h' },
  { value: '8', label: 'A shift, 8 h' },
  { value: '24', label: '1 day' },
  { value: 'other', label: 'Other' },
];
/** As a `datetime-local` field reads and writes. */
const LOCAL = 'YYYY-MM-DDTHH:mm';

/** A shelf always has an end and a reason. The end is given on the site's own clock. */
export function ShelveDialog({ alert, onClose }: { alert: Alert; onClose: () => void }) {
  const { timeZone } = alert;
  const [opened] = useState(() => Date.now());
  const [span, setSpan] = useState('8');
  const [other, setOther] = useState(() => dayjs(opened).tz(timeZone).add(2, 'day').format(LOCAL));
  const [reason, setReason] = useState('');
  const untilFrom = (now: number): Date => {
    if (span !== 'other') return new Date(now + Number(span) * 3_600_000);
    return other ? dayjs.tz(other, timeZone).toDate() : new Date(NaN);
  };
  const put = useMutation({
    mutationFn: () => shelve(alert.id, untilFrom(Date.now()), reason.trim()),
    onSuccess: onClose,
  });
  const until = untilFrom(opened);
  const named = !Number.isNaN(until.getTime());
  return (
    <ConfirmDialog
      opened
      title={`Shelve: ${alert.axisTag}, ${alert.title}`}
      confirmLabel="Shelve it"
      disabled={!reason.trim() || !named}
      loading={put.isPending}
      problem={put.error?.message ?? null}
      onConfirm={() => put.mutate()}
      onClose={onClose}
    >
      <SegmentedControl fullWidth aria-label="For how long" value={span} onChange={setSpan} data={SPANS} />
      {span === 'other' && (
        <TextInput
          mt="md"
          type="datetime-local"
          label="Until"
          description={`on the clock of ${alert.siteName} (${timeZone}), within 30 days`}
          required
          value={other}
          onChange={(event) => setOther(event.currentTarget.value)}
        />
      )}
      <p>
        Nobody is told about it until{' '}
        {named ? <SiteTime at={until} timeZone={timeZone} /> : 'the time that you give'}; afterwards it comes
        back by itself if it still holds.
      </p>
      <Textarea
        label="Reason"
        required
        autosize
        minRows={2}
        maxLength={2000}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}
