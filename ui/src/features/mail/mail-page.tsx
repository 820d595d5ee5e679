import { Button } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { answer, client, Problem } from '../../api/client';
import { may } from '../../api/policy';
import { queryClient } from '../../api/query-client';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';

const ZONE = Intl.DateTimeFormat().resolvedOptions().timeZone;

export function Component() {
  const { user } = useSession();
  return (
    <>
      <title>Mail · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>Mail</h1>
      <div style={{ display: 'grid', gap: 20 }}>
        {may(user, 'people.manage') && <Outbox />}
        <DemoInbox />
      </div>
    </>
  );
}

/** What the service has to send: nothing leaves by another way. */
function Outbox() {
  const { data, error, refetch } = useQuery({
    queryKey: ['mail', 'outbox'],
    queryFn: () => answer(client.GET('/api/v1/mail/outbox', { params: { query: {} } })),
    refetchInterval: 5_000,
  });
  const resend = useMutation({
    mutationFn: (id: number) =>
      answer(client.POST('/api/v1/mail/outbox/{id}/resend', { params: { path: { id } } })),
    onSuccess: () => queryClient.invalidateQueries({ queryKey: ['mail'] }),
  });
  if (error && !data) return <ErrorState error={error} what="The outbox" onRetry={() => void refetch()} />;
  return (
    <Card title="Outbox" sub="newest first">
      <div className="scroll-x">
        <table className="plain-table left">
          <thead>
            <tr>
              <th>Made</th>
              <th>To</th>
              <th>Subject</th>
              <th>State</th>
              <th />
            </tr>
          </thead>
          <tbody>
            {data?.items.map((mail) => (
              <tr key={mail.id}>
                <td className="nowrap">
                  <SiteTime at={mail.createdAt} timeZone={ZONE} />
                </td>
                <td>{mail.to}</td>
                <td>{mail.subject}</td>
                <td>
                  {mail.state}
                  {mail.error && <div className="small soft">{mail.error}</div>}
                </td>
                <td>
                  {mail.state === 'failed' && (
                    <Button size="compact-sm" variant="default" onClick={() => resend.mutate(mail.id)}>
                      Send again
                    </Button>
                  )}
                </td>
              </tr>
            ))}
          </tbody>
        </table>
      </div>
      {data?.items.length === 0 && <p className="soft">No mail yet.</p>}
    </Card>
  );
}

/** The demo's stand-in for everybody's mailboxes. */
function DemoInbox() {
  const [open, setOpen] = useState<string | null>(null);
  const { data, error, isPending, refetch } = useQuery({
    queryKey: ['mail', 'demo-inbox'],
    queryFn: () => answer(client.GET('/api/v1/mail/demo-inbox')),
    refetchInterval: 3_000,
    retry: false,
  });
  if (error instanceof Problem && error.status === 404)
    return <EmptyState title="No demo inbox here">Mails go to people’s own mailboxes.</EmptyState>;
  if (error && !data)
    return <ErrorState error={error} what="The demo inbox" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[200]} />;
  const message = data.items.find(({ id }) => id === open);
  return (
    <Card title="Demo inbox" sub="what left for the people of Tarnwick; nothing goes outside this machine">
      {data.items.length === 0 ? (
        <p className="soft">No mail has arrived yet. An alert that nobody acknowledges brings the first.</p>
      ) : (
        <table className="plain-table left">
          <thead>
            <tr>
              <th>At</th>
              <th>To</th>
              <th>Subject</th>
            </tr>
          </thead>
          <tbody>
            {data.items.map(({ id, at, to, subject }) => (
              <tr key={id}>
                <td className="nowrap">
                  <SiteTime at={at} timeZone={ZONE} />
                </td>
                <td>{to}</td>
                <td>
                  <Button
                    variant="transparent"
                    size="compact-sm"
                    p={0}
                    onClick={() => setOpen(open === id ? null : id)}
                    aria-expanded={open === id}
                  >
                    {subject}
                  </Button>
                </td>
              </tr>
            ))}
          </tbody>
        </table>
      )}
      {message && (
        <iframe
          title={message.subject}
          sandbox="allow-popups"
          srcDoc={
            message.html || `<pre>${message.text.replaceAll('&', '&amp;').replaceAll('<', '&lt;')}</pre>`
          }
          style={{
            width: '100%',
            height: 420,
            border: '1px solid var(--rule)',
            background: '#fff',
            marginTop: 14,
          }}
        />
      )}
    </Card>
  );
}
