import { Button } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { Card } from '../../components/card';
import { SiteTime } from '../../components/site-time';
import { OWN_ZONE } from '../people/people-api';
import { check, type Storage } from './storage-api';

/** Reads the whole working database and says whether it is sound. */
export function DatabaseCheckCard({ storage: { integrity, checking } }: { storage: Storage }) {
  const begin = useMutation({ mutationFn: () => check('database') });
  const busy = checking.includes('database');
  return (
    <Card
      title="Is the database whole?"
      sub="every page and index is read beside the working service; some gigabytes take a minute"
    >
      <Button variant="outline" loading={begin.isPending || busy} onClick={() => begin.mutate()}>
        Check the database
      </Button>
      <div role="status" style={{ marginTop: 10 }}>
        {begin.error && <p style={{ color: 'var(--out)', margin: 0 }}>{begin.error.message}</p>}
        {integrity === null ? (
          <span className="soft">{busy ? 'It is being read.' : 'It was not checked yet.'}</span>
        ) : integrity.fault === null ? (
          <>
            <b>The database is whole</b>, read <SiteTime at={integrity.at} timeZone={OWN_ZONE} relative />.
          </>
        ) : (
          <>
            <b style={{ color: 'var(--out)' }}>The database is damaged: {integrity.fault}.</b>
            <p style={{ margin: '6px 0 0' }}>
              No backup is deleted while the newest is damaged too. Stop the service, keep a copy of the data
              folder, and restore the newest backup that was found whole.
            </p>
          </>
        )}
      </div>
    </Card>
  );
}
