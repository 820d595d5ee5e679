import { Button, SegmentedControl } from '@mantine/core';
import { useInfiniteQuery, useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { Link } from 'react-router-dom';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import { OWN_ZONE } from '../people/people-api';
import classes from './mail.module.css';
import { outboxQuery, resend, type MailState } from './mail-api';

const WORDS: Record<MailState, string> = {
  queued: 'waits',
  sent: 'sent',
  failed: 'given up',
  grouped: 'sent with others',
};

/** What the service has to send: nothing leaves by another way. */
export function Outbox() {
  const [state, setState] = useState<MailState | null>(null);
  const { data, error, isPending, refetch, hasNextPage, fetchNextPage, isFetchingNextPage } =
    useInfiniteQuery(outboxQuery(state));
  const again = useMutation({ mutationFn: resend });
  if (error && !data) return <ErrorState error={error} what="The outbox" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[200]} />;
  const mails = data.pages.flatMap(({ items }) => items);
  return (
    <Card title="Outbox" sub="newest first">
      <SegmentedControl
        size="xs"
        mb="sm"
        aria-label="Which mails"
        value={state ?? 'all'}
        onChange={(value) => setState(value === 'all' ? null : (value as MailState))}
        data={[
          { value: 'all', label: 'all' },
          { value: 'queued', label: 'waiting' },
          { value: 'failed', label: 'given up' },
        ]}
      />
      {mails.length === 0 ? (
        <p className="soft">{state ? 'None.' : 'No mail yet.'}</p>
      ) : (
        <ScrollX label="Outbox">
          <table className="plain-table left">
            <thead>
              <tr>
                <th>Made</th>
                <th>To</th>
                <th>Subject</th>
                <th>State</th>
                <th>If it failed</th>
              </tr>
            </thead>
            <tbody>
              {mails.map((mail) => (
                <tr key={mail.id}>
                  <td className="nowrap">
                    <SiteTime at={mail.createdAt} timeZone={OWN_ZONE} />
                  </td>
                  <td>{mail.channel === 'mail' ? mail.to : `${mail.channel} ${mail.to}`}</td>
                  <td>
                    {mail.alertId === null ? (
                      mail.subject
                    ) : (
                      <Link to={`/alerts/${mail.alertId}`}>{mail.subject}</Link>
                    )}
                  </td>
                  <td>
                    {WORDS[mail.state]}
                    {mail.groupId !== null && ` in mail ${mail.groupId}`}
                    {mail.sentAt && (
                      <>
                        {' '}
                        <SiteTime at={mail.sentAt} timeZone={OWN_ZONE} />
                      </>
                    )}
                    {mail.perhapsAgain && (
                      <div className="small soft">
                        the service was stopped while it went out: it may have come twice
                      </div>
                    )}
                    {mail.state !== 'sent' && mail.attempts > 0 && (
                      <div className="small soft">
                        tried {mail.attempts === 1 ? 'once' : `${mail.attempts} times`}
                        {mail.error && `: ${mail.error}`}
                      </div>
                    )}
                  </td>
                  <td>
                    {mail.state === 'failed' && (
                      <Button
                        size="compact-sm"
                        variant="default"
                        aria-label={`Send again to ${mail.to}: ${mail.subject}`}
                        loading={again.isPending && again.variables === mail.id}
                        onClick={() => again.mutate(mail.id)}
                      >
                        Send again
                      </Button>
                    )}
                  </td>
                </tr>
              ))}
            </tbody>
          </table>
        </ScrollX>
      )}
      {again.error && (
        <p role="alert" className={classes.refusal}>
          {again.error.message}
        </p>
      )}
      {hasNextPage && (
        <Button variant="default" mt="sm" loading={isFetchingNextPage} onClick={() => void fetchNextPage()}>
          Older ones
        </Button>
      )}
    </Card>
  );
}
