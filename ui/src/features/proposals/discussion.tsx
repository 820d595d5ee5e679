import { Button, Textarea } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { answer, client } from '../../api/client';
import { queryClient } from '../../api/query-client';
import { Card } from '../../components/card';
import { significant } from '../../components/quantity';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import classes from './proposal-page.module.css';
import type { Proposal } from './proposals-api';

/** Every set of gains that was on offer, who made it and why. */
export function Versions({
  proposal: { versions, version, approvedVersion, timeZone },
}: {
  proposal: Proposal;
}) {
  if (versions.length < 2) return null;
  return (
    <Card title="Versions" sub="newest first; an approval is of one version">
      <ScrollX label="Versions">
        <table className="plain-table">
          <thead>
            <tr>
              <th>No.</th>
              <th style={{ textAlign: 'left' }}>Made</th>
              <th>Structure</th>
              <th>λ</th>
              <th>Kp</th>
              <th>Ki</th>
              <th>Kd</th>
            </tr>
          </thead>
          <tbody>
            {[...versions].reverse().map(({ version: number, at, by, proposed, note }) => (
              <tr key={number}>
                <td>
                  {number}
                  {number === version && <b style={{ fontWeight: 600 }}>&nbsp;now</b>}
                  {number === approvedVersion && <b style={{ fontWeight: 600 }}>&nbsp;approved</b>}
                </td>
                <td style={{ textAlign: 'left' }}>
                  <SiteTime at={at} timeZone={timeZone} /> by {by}
                  {note && <div className="small soft">{note}</div>}
                </td>
                <td>{proposed?.structure ?? 'no gains'}</td>
                <td>{proposed?.lambda?.toFixed(1) ?? '–'}</td>
                <td>{proposed ? significant(proposed.gains.kp) : '–'}</td>
                <td>{proposed ? significant(proposed.gains.ki) : '–'}</td>
                <td>{proposed ? significant(proposed.gains.kd) : '–'}</td>
              </tr>
            ))}
          </tbody>
        </table>
      </ScrollX>
    </Card>
  );
}

/** What people said about it; nothing here changes a version or an approval. */
export function Discussion({ proposal: { id, events, timeZone } }: { proposal: Proposal }) {
  const [text, setText] = useState('');
  const said = events.filter(({ action }) => action === 'said');
  const say = useMutation({
    mutationFn: () =>
      answer(
        client.POST('/api/v1/proposals/{id}/comments', {
          params: { path: { id } },
          body: { text: text.trim() },
        }),
      ),
    onSuccess: (proposal) => {
      setText('');
      queryClient.setQueryData(['proposal', id], proposal);
    },
  });
  return (
    <Card title="Discussion">
      {said.length === 0 && (
        <p className="soft" style={{ margin: 0 }}>
          Nobody has said anything yet.
        </p>
      )}
      <ol className={classes.record}>
        {said.map(({ at, by, note, version }) => (
          <li key={at}>
            <span className="small soft">
              <SiteTime at={at} timeZone={timeZone} />, {by} on version {version}
            </span>
            <div style={{ whiteSpace: 'pre-wrap', overflowWrap: 'anywhere' }}>{note}</div>
          </li>
        ))}
      </ol>
      <form
        className="no-print"
        style={{ marginTop: 12, display: 'grid', gap: 10 }}
        onSubmit={(event) => {
          event.preventDefault();
          say.mutate();
        }}
      >
        <Textarea
          aria-label="Say something about this proposal"
          placeholder="A question, a doubt, what you saw at the machine"
          autosize
          minRows={2}
          maxLength={2000}
          value={text}
          onChange={(event) => setText(event.currentTarget.value)}
        />
        {say.error && (
          <p role="alert" style={{ color: 'var(--out)', margin: 0 }}>
            {say.error.message}
          </p>
        )}
        <Button
          type="submit"
          variant="default"
          disabled={!text.trim()}
          loading={say.isPending}
          style={{ justifySelf: 'start' }}
        >
          Say it
        </Button>
      </form>
    </Card>
  );
}
