import { Button, NumberInput } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { Link } from 'react-router-dom';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { CaptureList } from '../captures/capture-list';
import { capturesQuery, recordCapture } from '../captures/captures-api';
import type { Axis } from '../fleet/fleet-api';

/** Captures of the axis, and its next seconds on demand. */
export function AxisCaptures({ axis }: { axis: Axis }) {
  const { user } = useSession();
  const { data } = useQuery(capturesQuery(axis.id));
  const [seconds, setSeconds] = useState(30);
  const record = useMutation({ mutationFn: () => recordCapture(axis.id, seconds) });
  return (
    <Card
      title="Captures"
      sub="newest first; 10 s before and 20 s after an alert are kept by themselves"
      aside={<Link to={`/captures?axis=${axis.id}`}>Upload one</Link>}
    >
      {may(user, 'capture.take', axis.siteId) && (
        <div style={{ display: 'flex', gap: 10, alignItems: 'end', flexWrap: 'wrap', marginBottom: 10 }}>
          <NumberInput
            label="Seconds to record"
            size="xs"
            w={140}
            min={5}
            max={120}
            value={seconds}
            onChange={(value) => setSeconds(Number(value))}
          />
          <Button
            size="xs"
            variant="outline"
            loading={record.isPending}
            disabled={!(seconds >= 5 && seconds <= 120)}
            onClick={() => record.mutate()}
          >
            Record now
          </Button>
          {record.error && (
            <span role="alert" className="small" style={{ color: 'var(--out)' }}>
              {record.error.message}
            </span>
          )}
        </div>
      )}
      {data?.items.length ? (
        <CaptureList captures={data.items} ofAxis />
      ) : (
        <p className="soft small">None yet.</p>
      )}
    </Card>
  );
}
