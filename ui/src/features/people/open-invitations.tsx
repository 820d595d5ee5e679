import { Button } from '@mantine/core';
import { notifications } from '@mantine/notifications';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import type { Schemas } from '../../api/client';
import { Card } from '../../components/card';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { SiteTime } from '../../components/site-time';
import { openInvitationsQuery, OWN_ZONE, revokeInvitation, type Invitation } from './people-api';
import classes from './people.module.css';

/** Who has a link and has not come in by it yet. */
export function OpenInvitations({ sites }: { sites: Schemas['SiteDto'][] }) {
  const { data, error } = useQuery(openInvitationsQuery);
  const [revoking, setRevoking] = useState<Invitation | null>(null);
  const nameOf = (siteId: number): string => sites.find(({ id }) => id === siteId)?.name ?? `site ${siteId}`;
  return (
    <Card title="Open invitations">
      {error && (
        <p role="alert" className={classes.refusal}>
          {error.message}
        </p>
      )}
      {data?.items.length === 0 && <p className="soft">None.</p>}
      {data?.items.map((invitation) => (
        <div key={invitation.id} className={classes.invitation}>
          <div>
            {invitation.name}, {invitation.email}
            <div className="small soft">
              {invitation.roles.map(({ siteId, role }) => `${role} on ${nameOf(siteId)}`).join(', ')}; until{' '}
              <SiteTime at={invitation.expiresAt} timeZone={OWN_ZONE} />
            </div>
          </div>
          <Button
            size="compact-sm"
            variant="default"
            aria-label={`Revoke the invitation of ${invitation.name}`}
            onClick={() => setRevoking(invitation)}
          >
            Revoke …
          </Button>
        </div>
      ))}
      {revoking && <Revoke invitation={revoking} onClose={() => setRevoking(null)} />}
    </Card>
  );
}

function Revoke({
  invitation: { id, name, email },
  onClose,
}: {
  invitation: Invitation;
  onClose: () => void;
}) {
  const revoke = useMutation({
    mutationFn: () => revokeInvitation(id),
    onSuccess: () => {
      notifications.show({
        message: `The link of ${name} no longer works.`,
        closeButtonProps: { 'aria-label': 'Close' },
      });
      onClose();
    },
  });
  return (
    <ConfirmDialog
      opened
      title={`Revoke the invitation of ${name}`}
      confirmLabel="Revoke it"
      loading={revoke.isPending}
      problem={revoke.error?.message ?? null}
      onConfirm={() => revoke.mutate()}
      onClose={onClose}
    >
      The link in the mail to {email} stops working.
    </ConfirmDialog>
  );
}
