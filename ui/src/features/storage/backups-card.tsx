import { Button, Progress } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { Card } from '../../components/card';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import { OWN_ZONE } from '../people/people-api';
import { backUp, bytes, check, type Backup, type Storage } from './storage-api';
import classes from './storage.module.css';

/** What there is to fall back on, and how. */
export function BackupsCard({ storage: { backups, checking, freeBytes } }: { storage: Storage }) {
  const [asking, setAsking] = useState(false);
  const make = useMutation({ mutationFn: backUp, onSuccess: () => setAsking(false) });
  const checkOne = useMutation({ mutationFn: check });
  const { items, kept, neededBytes, progress, failure } = backups;
  const fits = freeBytes >= neededBytes;
  return (
    <Card
      title="Backups"
      sub={`one a day while the service works; the newest of each of the last ${kept} days stays`}
    >
      <div className={classes.actions}>
        <Button onClick={() => setAsking(true)} disabled={progress !== null || !fits}>
          Back up now
        </Button>
        <span className="small soft">
          {fits
            ? `needs ${bytes(neededBytes)}; ${bytes(freeBytes)} are free`
            : `needs ${bytes(neededBytes)}, and only ${bytes(freeBytes)} are free: make room first`}
        </span>
      </div>
      <div role="status">
        {progress !== null && (
          <>
            <p className="small" style={{ margin: '10px 0 6px' }}>
              A backup is being made: {Math.floor(100 * progress)} %. You can leave this page.
            </p>
            <Progress value={100 * progress} aria-label="Backup" color="var(--press)" animated={false} />
          </>
        )}
        {failure && (
          <p style={{ color: 'var(--out)', margin: '10px 0 0' }}>
            The last backup was not made (<SiteTime at={failure.at} timeZone={OWN_ZONE} />
            ): {failure.why}.
          </p>
        )}
        {checkOne.error && <p style={{ color: 'var(--out)' }}>{checkOne.error.message}</p>}
      </div>
      {items.length === 0 ? (
        <p className="soft">No backup yet. The first is made within ten minutes of a start.</p>
      ) : (
        <ScrollX label="Backups" className={classes.gap}>
          <table className={`plain-table left ${classes.table}`}>
            <thead>
              <tr>
                <th>Made</th>
                <th>Size</th>
                <th>Integrity</th>
                <th>File</th>
              </tr>
            </thead>
            <tbody>
              {items.map((backup) => (
                <tr key={backup.name}>
                  <td className="nowrap">
                    <SiteTime at={backup.at} timeZone={OWN_ZONE} />
                  </td>
                  <td className="nowrap">{bytes(backup.bytes)}</td>
                  <td>
                    <Integrity
                      backup={backup}
                      busy={checking.includes(backup.name)}
                      onCheck={() => checkOne.mutate(backup.name)}
                    />
                  </td>
                  <td className={`small ${classes.file}`}>{backup.name}</td>
                </tr>
              ))}
            </tbody>
          </table>
        </ScrollX>
      )}
      <details className={classes.how}>
        <summary>How to restore</summary>
        <ol>
          <li>Choose a backup that was found whole, and stop the service.</li>
          <li>
            On the service’s machine:{' '}
            <code>
              npm run restore -- {'<data folder>'}/backups/{items[0]?.name ?? '<file>'}
            </code>
          </li>
          <li>Start the service. Gateways send again what they still hold.</li>
        </ol>
        <p className="small soft">
          Every page of the backup is read first. The former database is moved aside, never overwritten. What
          was stored after the backup was made is in the former file only. Copy backups to another machine
          too: these lie on the same disk as the database.
        </p>
      </details>
      <ConfirmDialog
        opened={asking}
        title="Back up the database now?"
        confirmLabel="Back up"
        loading={make.isPending}
        problem={make.error?.message ?? null}
        onConfirm={() => make.mutate()}
        onClose={() => setAsking(false)}
      >
        <p style={{ margin: 0 }}>
          It takes {bytes(neededBytes)} of disk at most and delays nothing. When it was found whole, it takes
          the place of an earlier one of today. The record will name you.
        </p>
      </ConfirmDialog>
    </Card>
  );
}

function Integrity({
  backup: { name, integrity },
  busy,
  onCheck,
}: {
  backup: Backup;
  busy: boolean;
  onCheck: () => void;
}) {
  return (
    <div className={classes.integrity}>
      {integrity === null ? (
        <span className="soft">{busy ? 'being read' : 'not read yet'}</span>
      ) : integrity.fault === null ? (
        <span>
          whole{' '}
          <span className="soft small">
            <SiteTime at={integrity.at} timeZone={OWN_ZONE} />
          </span>
        </span>
      ) : (
        <span style={{ color: 'var(--out)' }}>
          <b>damaged:</b> {integrity.fault}
        </span>
      )}
      <Button
        size="compact-sm"
        variant="default"
        loading={busy}
        aria-label={`Check ${name}`}
        onClick={onCheck}
      >
        Check
      </Button>
    </div>
  );
}
