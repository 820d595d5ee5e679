import { Button, Select, TextInput, UnstyledButton } from '@mantine/core';
import { useDebouncedValue } from '@mantine/hooks';
import { useInfiniteQuery, useMutation, useQuery } from '@tanstack/react-query';
import { Fragment, useState } from 'react';
import { Link } from 'react-router-dom';
import { may } from '../../api/policy';
import { sitesQuery } from '../../api/sites';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import { OWN_ZONE } from '../people/people-api';
import { ChainCard } from './chain-card';
import { exportRecord, recordQuery, type Entry, type RecordFilter } from './record-api';
import classes from './record.module.css';

const SUBJECTS = [
  { value: 'axis', label: 'axes' },
  { value: 'proposal', label: 'proposals' },
  { value: 'alert', label: 'alerts' },
  { value: 'person', label: 'people' },
  { value: 'site', label: 'sites' },
  { value: 'gateway', label: 'gateways' },
  { value: 'storage', label: 'storage' },
];

const PAGE_OF: Record<string, string> = { axis: '/axes', proposal: '/proposals', alert: '/alerts' };

export function Component() {
  const { user } = useSession();
  return (
    <>
      <title>Record · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>Record</h1>
      {may(user, 'audit.read') ? (
        <Record />
      ) : (
        <EmptyState title="The record is for engineers and administrators">
          Ask an administrator of your site.
        </EmptyState>
      )}
    </>
  );
}

function Record() {
  const { user } = useSession();
  const administrator = may(user, 'people.manage');
  const sites = useQuery(sitesQuery);
  const [siteId, setSiteId] = useState<string | null>(null);
  const [subjectType, setSubjectType] = useState<string | null>(null);
  const [number, setNumber] = useState('');
  const [subjectId] = useDebouncedValue(number.trim(), 300);
  const filter: RecordFilter = {
    ...(siteId && { siteId: Number(siteId) }),
    ...(subjectType && { subjectType }),
    ...(subjectId && { subjectId }),
  };
  const save = useMutation({ mutationFn: () => exportRecord(filter) });
  return (
    <div style={{ display: 'grid', gridTemplateColumns: 'minmax(0, 1fr)', gap: 18 }}>
      {administrator && <ChainCard />}
      <Card title="What people and the service did" sub="newest first; nothing here can be altered">
        <div className={classes.filters}>
          <Select
            label="Site"
            placeholder="all"
            clearable
            data={(sites.data?.items ?? []).map(({ id, name }) => ({ value: String(id), label: name }))}
            value={siteId}
            onChange={setSiteId}
          />
          <Select
            label="About"
            placeholder="everything"
            clearable
            data={SUBJECTS}
            value={subjectType}
            onChange={setSubjectType}
          />
          <TextInput
            label="Number"
            placeholder="such as 12"
            maxLength={100}
            value={number}
            onChange={(event) => setNumber(event.currentTarget.value)}
          />
          {administrator && (
            <Button variant="default" loading={save.isPending} onClick={() => save.mutate()}>
              Export as JSON lines
            </Button>
          )}
        </div>
        {save.error && (
          <p role="alert" style={{ color: 'var(--out)' }}>
            {save.error.message}
          </p>
        )}
        <Entries filter={filter} />
      </Card>
    </div>
  );
}

function Entries({ filter }: { filter: RecordFilter }) {
  const { data, error, isPending, refetch, hasNextPage, fetchNextPage, isFetchingNextPage } =
    useInfiniteQuery(recordQuery(filter));
  const sites = useQuery(sitesQuery);
  const [open, setOpen] = useState<number | null>(null);
  if (error && !data) return <ErrorState error={error} what="The record" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[320]} />;
  const entries = data.pages.flatMap(({ items }) => items);
  if (entries.length === 0) return <p className="soft">Nothing of this is in the record.</p>;
  const zoneOf = ({ siteId }: Entry): string =>
    sites.data?.items.find(({ id }) => id === siteId)?.timeZone ?? OWN_ZONE;
  return (
    <>
      <ScrollX label="Entries of the record">
        <table className={`plain-table left ${classes.table}`}>
          <thead>
            <tr>
              <th>No.</th>
              <th>When</th>
              <th>Who</th>
              <th>What</th>
              <th>About</th>
              <th>Note</th>
              <th>Before and after</th>
            </tr>
          </thead>
          <tbody>
            {entries.map((entry) => {
              const shown = open === entry.id;
              const values = entry.before !== null || entry.after !== null;
              return (
                <Fragment key={entry.id}>
                  <tr>
                    <td>{entry.id}</td>
                    <td className="nowrap">
                      <SiteTime at={entry.at} timeZone={zoneOf(entry)} />
                    </td>
                    <td className="nowrap">{entry.actor}</td>
                    <td className="nowrap">{inWords(entry.action)}</td>
                    <td className="nowrap">
                      <Subject entry={entry} />
                    </td>
                    <td className={classes.note}>{entry.note}</td>
                    <td>
                      {values && (
                        <UnstyledButton
                          aria-expanded={shown}
                          aria-label={`Values of entry ${entry.id}`}
                          style={{ color: 'var(--press)' }}
                          onClick={() => setOpen(shown ? null : entry.id)}
                        >
                          {shown ? 'hide' : 'show'}
                        </UnstyledButton>
                      )}
                    </td>
                  </tr>
                  {shown && (
                    <tr>
                      <td colSpan={7}>
                        <div className={classes.values}>
                          <Value title="Before" value={entry.before} />
                          <Value title="After" value={entry.after} />
                        </div>
                      </td>
                    </tr>
                  )}
                </Fragment>
              );
            })}
          </tbody>
        </table>
      </ScrollX>
      {hasNextPage && (
        <Button variant="default" mt="sm" loading={isFetchingNextPage} onClick={() => void fetchNextPage()}>
          Older ones
        </Button>
      )}
    </>
  );
}

/** "proposal.sent-for-review" → "sent for review": what it is about has a column of its own. */
const inWords = (action: string): string => action.slice(action.indexOf('.') + 1).replaceAll('-', ' ');

function Subject({ entry: { subjectType, subjectId } }: { entry: Entry }) {
  const page = PAGE_OF[subjectType];
  const text = `${subjectType} ${subjectId}`;
  return page ? <Link to={`${page}/${subjectId}`}>{text}</Link> : text;
}

function Value({ title, value }: { title: string; value: unknown }) {
  if (value === null) return null;
  return (
    <div>
      <b>{title}</b>
      <pre tabIndex={0} aria-label={`${title}, as JSON`}>
        {JSON.stringify(value, null, 2)}
      </pre>
    </div>
  );
}
