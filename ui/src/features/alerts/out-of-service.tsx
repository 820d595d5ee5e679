import { Button, Textarea } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { ConfirmDialog } from '../../components/confirm-dialog';
import classes from './alerts.module.css';
import { returnToService, takeOutOfService, type Alert } from './alerts-api';

/** Takes an alert out of service and back: for who may, on the alert's own page. */
export function Service({ alert }: { alert: Alert }) {
  const { user } = useSession();
  const [asking, setAsking] = useState(false);
  const [reason, setReason] = useState('');
  const take = useMutation({
    mutationFn: () => takeOutOfService(alert.id, reason.trim()),
    onSuccess: () => setAsking(false),
  });
  const back = useMutation({ mutationFn: () => returnToService(alert.id) });
  if (alert.state === 'normal' || !may(user, 'alert.out-of-service', alert.siteId)) return null;
  return (
    <div style={{ marginTop: 10 }}>
      {alert.state === 'out-of-service' ? (
        <Button variant="outline" loading={back.isPending} onClick={() => back.mutate()}>
          Return to service
        </Button>
      ) : (
        <Button variant="subtle" onClick={() => setAsking(true)}>
          Take out of service …
        </Button>
      )}
      {back.error && (
        <p role="alert" className={classes.refusal}>
          {back.error.message}
        </p>
      )}
      {asking && (
        <ConfirmDialog
          opened
          title={`Out of service: ${alert.axisTag}, ${alert.title}`}
          confirmLabel="Take it out of service"
          disabled={!reason.trim()}
          loading={take.isPending}
          problem={take.error?.message ?? null}
          onConfirm={() => take.mutate()}
          onClose={() => setAsking(false)}
        >
          <p>
            Nobody is told of this on {alert.axisTag} any more, until somebody returns it to service. It does
            not come back by itself: to wait for a time, shelve it instead.
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
      )}
    </div>
  );
}
