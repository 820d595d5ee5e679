import { UnstyledButton } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { Problem } from '../../api/client';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';
import { OWN_ZONE } from '../people/people-api';
import classes from './mail.module.css';
import { demoInboxQuery, type DemoMessage } from './mail-api';

/** The demo's stand-in for everybody's mailboxes. */
export function DemoInbox() {
  const [open, setOpen] = useState<string | null>(null);
  const { data, error, isPending, refetch } = useQuery(demoInboxQuery);
  if (error instanceof Problem && error.status === 404)
    return <EmptyState title="No demo inbox here">Mails go to people’s own mailboxes.</EmptyState>;
  if (error && !data)
    return <ErrorState error={error} what="The demo inbox" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[200]} />;
  return (
    <Card title="Demo inbox" sub="what left for the people of Tarnwick; nothing goes outside this machine">
      {data.items.length === 0 && (
        <p className="soft">No mail has arrived yet. An alert that nobody acknowledges brings the first.</p>
      )}
      <ul className={classes.list}>
        {data.items.map((message) => (
          <li key={message.id} className={classes.message}>
            <UnstyledButton
              className={classes.subject}
              onClick={() => setOpen(open === message.id ? null : message.id)}
              aria-expanded={open === message.id}
            >
              <b>{message.subject}</b>
              <div className="small soft">
                to {message.to}, <SiteTime at={message.at} timeZone={OWN_ZONE} />
              </div>
            </UnstyledButton>
            {open === message.id && <Letter message={message} />}
          </li>
        ))}
      </ul>
    </Card>
  );
}

/** A mail may hold anything: it is shown without scripts and without our origin, and its links open in a tab of their own. */
function Letter({ message: { subject, html, text } }: { message: DemoMessage }) {
  return (
    <iframe
      title={subject}
      className={classes.letter}
      sandbox="allow-popups allow-popups-to-escape-sandbox"
      srcDoc={`<base target="_blank">${html || `<pre style="white-space:pre-wrap">${escapeHtml(text)}</pre>`}`}
    />
  );
}

/** Text that stands for itself within HTML (HTML Living Standard, 13.1.2.4). */
const escapeHtml = (text: string): string => text.replaceAll('&', '&amp;').replaceAll('<', '&lt;');
