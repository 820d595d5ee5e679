import { Button, Skeleton } from '@mantine/core';
import type { ReactNode } from 'react';
import { Problem } from '../api/client';

/** A page with nothing on it yet says what to do first. */
export function EmptyState({ title, children }: { title: string; children?: ReactNode }) {
  return (
    <div className="card" style={{ textAlign: 'center', padding: '44px 20px' }}>
      <h2 style={{ fontSize: 18 }}>{title}</h2>
      <p className="soft" style={{ margin: '6px auto 0', maxWidth: 460 }}>
        {children}
      </p>
    </div>
  );
}

/** What happened, what was kept, what to do. */
export function ErrorState({ error, what, onRetry }: { error: unknown; what: string; onRetry?: () => void }) {
  const refused = error instanceof Problem;
  return (
    <div className="card" role="alert" style={{ borderColor: 'var(--out)' }}>
      <h2>{refused && error.status === 404 ? `${what}: not found` : `${what} could not be loaded`}</h2>
      <p style={{ margin: '6px 0 12px' }}>
        {refused ? error.message : 'The service does not answer.'}{' '}
        <span className="soft">Nothing was changed or lost.</span>
      </p>
      {onRetry && (
        <Button variant="outline" onClick={onRetry}>
          Try again
        </Button>
      )}
    </div>
  );
}

/** Holds the place of cards that are on their way, without moving anything when they come. */
export function Waiting({ heights }: { heights: number[] }) {
  return (
    <div aria-busy="true" style={{ display: 'grid', gap: 18 }}>
      <span className="visually-hidden">Loading</span>
      {heights.map((height, i) => (
        <Skeleton key={i} height={height} radius={5} animate={false} />
      ))}
    </div>
  );
}
