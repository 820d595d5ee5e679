import { useQuery } from '@tanstack/react-query';
import { useSearchParams } from 'react-router-dom';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { CaptureList } from './capture-list';
import { capturesQuery } from './captures-api';
import { UploadForm } from './upload-form';

export function Component() {
  const { user } = useSession();
  const [search] = useSearchParams();
  const axisId = Number(search.get('axis')) || null;
  const { data, error, refetch } = useQuery(capturesQuery());
  return (
    <>
      <title>Captures · Polewright</title>
      <h1>Captures</h1>
      <p className="soft" style={{ margin: '4px 0 18px' }}>
        Recorded stretches of one axis: uploaded, taken on demand, or kept around an alert. Each is identified
        by the same mathematics as the live stream.
      </p>
      <div style={{ display: 'grid', gap: 20, gridTemplateColumns: 'minmax(0, 1fr)' }}>
        {may(user, 'capture.take') && <UploadForm axisId={axisId} />}
        {error && !data ? (
          <ErrorState error={error} what="The captures" onRetry={() => void refetch()} />
        ) : !data ? (
          <Waiting heights={[240]} />
        ) : data.items.length === 0 ? (
          <EmptyState title="No captures yet">
            Upload a CSV file above, or open an axis and record its next seconds.
          </EmptyState>
        ) : (
          <Card title="Newest first">
            <CaptureList captures={data.items} />
          </Card>
        )}
      </div>
    </>
  );
}
