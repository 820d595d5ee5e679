import { Button, Textarea } from '@mantine/core';
import { useInfiniteQuery, useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { Card } from '../../components/card';
import { SiteTime } from '../../components/site-time';
import { Refusal } from './refusal';
import { notesQuery, writeNote } from './rota-api';
import classes from './rota.module.css';

/** What the person on call leaves for the next one. */
export function HandOverNotes({
  siteId,
  timeZone,
  writes,
}: {
  siteId: number;
  timeZone: string;
  writes: boolean;
}) {
  const { data, error, hasNextPage, fetchNextPage, isFetchingNextPage } = useInfiniteQuery(
    notesQuery(siteId),
  );
  const [text, setText] = useState('');
  const write = useMutation({
    mutationFn: () => writeNote(siteId, text.trim()),
    onSuccess: () => setText(''),
  });
  const notes = data?.pages.flatMap(({ items }) => items);
  return (
    <Card title="Hand-over notes" sub="what the person on call leaves for the next one">
      {writes && (
        <form
          className={classes.form}
          style={{ marginBottom: 14 }}
          onSubmit={(event) => {
            event.preventDefault();
            write.mutate();
          }}
        >
          <Textarea
            label="New note"
            autosize
            minRows={2}
            maxLength={4000}
            value={text}
            onChange={(event) => setText(event.currentTarget.value)}
          />
          {write.error && <Refusal error={write.error} />}
          <Button type="submit" variant="outline" disabled={!text.trim()} loading={write.isPending}>
            Leave it
          </Button>
        </form>
      )}
      {error && <Refusal error={error} />}
      {notes?.length === 0 && <p className="soft">No notes yet.</p>}
      {notes?.map((note) => (
        <div key={note.id} className={classes.note}>
          <span className="soft small">
            {note.by}, <SiteTime at={note.at} timeZone={timeZone} />
          </span>
          <div className={classes.text}>{note.text}</div>
        </div>
      ))}
      {hasNextPage && (
        <Button
          variant="default"
          size="compact-sm"
          mt="sm"
          loading={isFetchingNextPage}
          onClick={() => void fetchNextPage()}
        >
          Older notes
        </Button>
      )}
    </Card>
  );
}
