import { useQuery } from '@tanstack/react-query';
import { Link } from 'react-router-dom';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import { LambdaRuler, rulerText } from '../../components/lambda-ruler';
import { limitsQuery, plantOf } from '../bench/bench-api';
import { benchStart } from '../bench/bench-state';
import type { Axis } from '../fleet/fleet-api';

/** What binds: how fast and how slow λ may be on the plant as identified. */
export function LambdaCard({ axis }: { axis: Axis }) {
  const start = benchStart(axis);
  const plant = plantOf(axis, start.plant);
  const { data, error, refetch } = useQuery(limitsQuery(axis, plant, start));
  if (!plant) return null;
  return (
    <Card
      title="How fast it may be"
      sub={`λ with ${axis.structure} on the plant as ${start.plant === 'identified' ? 'identified' : 'commissioned'}, limits and what binds`}
      aside={<Link to={`/axes/${axis.id}/bench`}>Try gains</Link>}
    >
      {data ? (
        <>
          <LambdaRuler binding={data} />
          <p className="small" style={{ margin: '6px 0 0' }}>
            {data.kept
              ? `The commissioned ${axis.lambda.toFixed(1)} rad/s is inside every limit.`
              : rulerText(data)}
          </p>
        </>
      ) : error ? (
        <ErrorState error={error} what="The limits" onRetry={() => void refetch()} />
      ) : (
        <Waiting heights={[120]} />
      )}
    </Card>
  );
}
