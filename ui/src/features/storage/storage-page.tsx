import { useQuery } from '@tanstack/react-query';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { BackupsCard } from './backups-card';
import { DatabaseCheckCard } from './database-check-card';
import { DiskCard } from './disk-card';
import { RetentionCard } from './retention-card';
import { storageQuery } from './storage-api';
import classes from './storage.module.css';
import { TablesCard } from './tables-card';

export function Component() {
  const { user } = useSession();
  return (
    <>
      <title>Storage · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>Storage</h1>
      {may(user, 'storage.manage') ? (
        <Storage />
      ) : (
        <EmptyState title="Storage is for administrators">Ask an administrator of your site.</EmptyState>
      )}
    </>
  );
}

function Storage() {
  const { data, error, refetch } = useQuery(storageQuery);
  if (error && !data) return <ErrorState error={error} what="Storage" onRetry={() => void refetch()} />;
  if (!data) return <Waiting heights={[200, 320, 320]} />;
  return (
    <div className={classes.page}>
      <div className={classes.wide}>
        <DiskCard storage={data} />
      </div>
      <div className={classes.column}>
        <BackupsCard storage={data} />
        <DatabaseCheckCard storage={data} />
      </div>
      <RetentionCard
        key={data.retention.map(({ keptSeconds }) => keptSeconds).join()}
        retention={data.retention}
        mayChange={data.mayChangeRetention}
      />
      <div className={classes.wide}>
        <TablesCard storage={data} />
      </div>
    </div>
  );
}
