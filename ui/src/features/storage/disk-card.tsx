import type { ReactNode } from 'react';
import { Card } from '../../components/card';
import { SiteTime } from '../../components/site-time';
import { OWN_ZONE } from '../people/people-api';
import { bytes, stretch, type Storage } from './storage-api';
import classes from './storage.module.css';

/** A full disk this close needs a person, days. */
const SOON = 90;

/** What fills the disk, and when it will be full. */
export function DiskCard({ storage }: { storage: Storage }) {
  const { freeBytes, totalBytes, databaseBytes, reusableBytes, backups, tables } = storage;
  const captureBytes = tables.find(({ name }) => name === 'capture files')?.bytes ?? 0;
  const backupBytes = backups.items.reduce((sum, backup) => sum + backup.bytes, 0);
  const others = Math.max(0, totalBytes - freeBytes - databaseBytes - backupBytes - captureBytes);
  const parts = [
    { name: 'Database', size: databaseBytes, className: classes.database },
    { name: 'Backups', size: backupBytes, className: classes.backups },
    { name: 'Capture files', size: captureBytes, className: classes.captures },
    { name: 'Other files', size: others, className: classes.others },
    { name: 'Free', size: freeBytes, className: classes.free },
  ];
  return (
    <Card title="Disk" aside={`${bytes(totalBytes)} in all`}>
      <p className={classes.forecast} role="status">
        <Forecast storage={storage} />
      </p>
      <div className={classes.bar} aria-hidden>
        {parts.map(({ name, size, className }) => (
          <span key={name} className={className} style={{ flexGrow: size / totalBytes }} />
        ))}
      </div>
      <dl className={classes.parts}>
        {parts.map(({ name, size, className }) => (
          <div key={name}>
            <dt>
              <span className={`${classes.key} ${className}`} aria-hidden /> {name}
            </dt>
            <dd>
              {bytes(size)}
              {name === 'Database' && reusableBytes >= 2 ** 20 && (
                <span className="soft small">, {bytes(reusableBytes)} of it free for new rows</span>
              )}
            </dd>
          </div>
        ))}
      </dl>
    </Card>
  );
}

function Forecast({ storage: { forecast, backups, freeBytes } }: { storage: Storage }): ReactNode {
  const growth = forecast.bytesPerDay !== null && (
    <>
      {' '}
      It grows by <b>{bytes(forecast.bytesPerDay)}</b> a day now.
    </>
  );
  switch (forecast.outcome) {
    case 'not-enough-history':
      return forecast.since === null ? (
        <>Not enough history yet: nothing has been measured. A forecast needs a day of measurements.</>
      ) : (
        <>
          Not enough history yet: measured since <SiteTime at={forecast.since} timeZone={OWN_ZONE} />. A
          forecast needs a day of measurements.
        </>
      );
    case 'not-within-ten-years':
      return (
        <>
          <b>The disk does not fill within ten years</b>, with {backups.kept} backups and everything kept as
          set below.{growth}
        </>
      );
    case 'backups-do-not-fit':
      return (
        <>
          <b style={{ color: 'var(--out)' }}>The {backups.kept} backups that are kept do not fit the disk</b>:{' '}
          {bytes(freeBytes)} are free. Make room, or give the data folder a larger disk.{growth}
        </>
      );
    case 'full-at':
      return (
        <>
          <b style={{ color: forecast.fullInDays! < SOON ? 'var(--out)' : 'inherit' }}>
            The disk is full in about {stretch(forecast.fullInDays! * 86_400)}
          </b>
          , on <SiteTime at={forecast.fullAt!} timeZone={OWN_ZONE} />, with the backups that grow alongside.
          {growth}
        </>
      );
  }
}
