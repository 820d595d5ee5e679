import { Button } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { Card } from '../../components/card';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import { OWN_ZONE } from '../people/people-api';
import { bytes, count, measure, stretch, type Storage } from './storage-api';
import classes from './storage.module.css';

const HOLDS: Record<string, string> = {
  indicator_second: 'Indicators by the second',
  indicator_minute: 'Indicators by the minute',
  indicator_hour: 'Indicators by the hour',
  move_record: 'Production moves',
  plant_estimate_row: 'Plant estimates',
  axis_checkpoint: 'What each axis’s identification remembers',
  audit_entry: 'The record',
  alert: 'Alerts',
  alert_event: 'What happened to alerts',
  capture: 'Captures, without their samples',
  'capture files': 'Samples and traces of captures, as files',
  proposal: 'Proposals',
  proposal_version: 'Versions of proposals',
  axis: 'Axes',
  mail_outbox: 'Mail that was sent',
  storage_measurement: 'These measurements',
};

/** Tables that are shown at first: the largest, and those that are kept for a time. */
const SHOWN = 8;

/** What every table holds and how it grows. */
export function TablesCard({ storage: { tables, measuredAt, measuring } }: { storage: Storage }) {
  const begin = useMutation({ mutationFn: measure });
  const [all, setAll] = useState(false);
  const shown = all ? tables : tables.filter(({ keptSeconds }, k) => k < SHOWN || keptSeconds !== null);
  return (
    <Card
      title="Tables"
      sub={
        measuredAt === null ? (
          'measured every six hours'
        ) : (
          <>
            measured <SiteTime at={measuredAt} timeZone={OWN_ZONE} relative />, every six hours
          </>
        )
      }
    >
      <Button variant="outline" loading={begin.isPending || measuring} onClick={() => begin.mutate()}>
        Measure now
      </Button>
      <div role="status">{begin.error && <p style={{ color: 'var(--out)' }}>{begin.error.message}</p>}</div>
      {tables.length === 0 ? (
        <p className="soft">
          Nothing has been measured yet. The first measurement is made a minute after a start.
        </p>
      ) : (
        <ScrollX label="Tables" className={classes.gap}>
          <table className="plain-table">
            <thead>
              <tr>
                <th>Holds</th>
                <th>Rows</th>
                <th>Size</th>
                <th>More rows a day</th>
                <th>Kept</th>
                <th>Oldest</th>
              </tr>
            </thead>
            <tbody>
              {shown.map((table) => (
                <tr key={table.name}>
                  <td>
                    {HOLDS[table.name] ?? table.name.replaceAll('_', ' ')}
                    {HOLDS[table.name] && table.name !== 'capture files' && (
                      <span className="soft small"> {table.name}</span>
                    )}
                  </td>
                  <td className="nowrap">{count(table.rows)}</td>
                  <td className="nowrap">{bytes(table.bytes)}</td>
                  <td className="nowrap">
                    {table.rowsPerDay === null ? (
                      <span className="soft">not known yet</span>
                    ) : (
                      count(table.rowsPerDay)
                    )}
                  </td>
                  <td className="nowrap">
                    {table.keptSeconds === null ? (
                      <span className="soft">–</span>
                    ) : (
                      stretch(table.keptSeconds)
                    )}
                  </td>
                  <td className="nowrap">
                    {table.oldest ? (
                      <SiteTime at={table.oldest} timeZone={OWN_ZONE} />
                    ) : (
                      <span className="soft">–</span>
                    )}
                  </td>
                </tr>
              ))}
            </tbody>
          </table>
        </ScrollX>
      )}
      {tables.length > shown.length && (
        <Button variant="subtle" size="compact-sm" mt="sm" onClick={() => setAll(true)}>
          Show all {tables.length} tables
        </Button>
      )}
    </Card>
  );
}
