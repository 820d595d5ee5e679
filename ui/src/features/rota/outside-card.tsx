import { Button, CopyButton, FileButton, Group, TextInput } from '@mantine/core';
import { notifications } from '@mantine/notifications';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useRef } from 'react';
import { saveFile } from '../../api/download';
import { Card } from '../../components/card';
import { SiteTime } from '../../components/site-time';
import { Refusal } from './refusal';
import { exportShifts, feedsQuery, importOverrides, makeFeed, revokeFeed, type Rota } from './rota-api';
import classes from './rota.module.css';

/** The rota outside these pages: in calendar programs and as a file. */
export function OutsideCard({
  rota: { siteId, timeZone },
  siteName,
  imports,
}: {
  rota: Rota;
  siteName: string;
  imports: boolean;
}) {
  const feeds = useQuery(feedsQuery);
  const make = useMutation({ mutationFn: (own: boolean) => makeFeed(siteId, own) });
  const revoke = useMutation({ mutationFn: revokeFeed, onSuccess: () => make.reset() });
  const save = useMutation({
    mutationFn: () => exportShifts(siteId),
    onSuccess: (file) => saveFile(file, `rota-${siteId}.csv`),
  });
  const load = useMutation({
    mutationFn: (file: File) => importOverrides(siteId, file),
    onSettled: () => forget.current?.(),
    onSuccess: ({ added, alreadyThere }) =>
      notifications.show({
        message: `${added} added as overrides${alreadyThere > 0 ? `, ${alreadyThere} were there already` : ''}.`,
        closeButtonProps: { 'aria-label': 'Close' },
      }),
  });
  // The same name may come again, with other lines in it.
  const forget = useRef<() => void>(null);
  const own = feeds.data?.items.filter((feed) => feed.siteId === siteId) ?? [];
  const error = make.error ?? revoke.error ?? save.error ?? load.error;
  return (
    <Card title="In your calendar and as a file" sub={siteName}>
      <div className={classes.columns}>
        <div>
          <p className={classes.lead}>
            A calendar program reads the rota at a private address. Who knows the address sees it: take it
            back when it got about.
          </p>
          <Group gap={8}>
            <Button variant="outline" loading={make.isPending} onClick={() => make.mutate(true)}>
              Address of my shifts
            </Button>
            <Button variant="outline" loading={make.isPending} onClick={() => make.mutate(false)}>
              Address of all shifts
            </Button>
          </Group>
          {make.data && (
            <div style={{ marginTop: 12 }}>
              <TextInput
                label="The address, shown this once"
                readOnly
                value={make.data.url}
                onFocus={(event) => event.currentTarget.select()}
              />
              <CopyButton value={make.data.url}>
                {({ copied, copy }) => (
                  <Button mt={8} size="compact-md" variant="default" onClick={copy}>
                    {copied ? 'Copied' : 'Copy it'}
                  </Button>
                )}
              </CopyButton>
            </div>
          )}
          {own.map((feed) => (
            <div key={feed.id} className={classes.override}>
              <span>
                {feed.own ? 'My shifts' : 'All shifts'}, made{' '}
                <SiteTime at={feed.createdAt} timeZone={timeZone} />,{' '}
                {feed.lastReadAt ? (
                  <>
                    last read <SiteTime at={feed.lastReadAt} timeZone={timeZone} />
                  </>
                ) : (
                  'not read yet'
                )}
              </span>
              <Button
                size="compact-sm"
                variant="default"
                aria-label={`Take back the address of ${feed.own ? 'my' : 'all'} shifts, number ${feed.id}`}
                loading={revoke.isPending && revoke.variables === feed.id}
                onClick={() => revoke.mutate(feed.id)}
              >
                Take back
              </Button>
            </div>
          ))}
        </div>
        <div>
          <p className={classes.lead}>
            The next four weeks as CSV.{' '}
            {imports &&
              'A CSV file with the columns from, to, email and, if you like, reason puts people in as overrides: all of its lines, or with one bad line none.'}
          </p>
          <Group gap={8}>
            <Button variant="outline" loading={save.isPending} onClick={() => save.mutate()}>
              Save as CSV
            </Button>
            {imports && (
              <FileButton
                resetRef={forget}
                accept=".csv,text/csv"
                onChange={(file) => file && load.mutate(file)}
              >
                {(props) => (
                  <Button variant="outline" loading={load.isPending} {...props}>
                    Take in a CSV file …
                  </Button>
                )}
              </FileButton>
            )}
          </Group>
        </div>
      </div>
      {error && <Refusal error={error} />}
    </Card>
  );
}
