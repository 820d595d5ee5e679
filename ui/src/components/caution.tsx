import type { ReactNode } from 'react';

/** Shown wherever gains can reach a machine. Ours is not a safety function and says so. */
export function Caution({ children }: { children?: ReactNode }) {
  return (
    <div
      role="note"
      style={{
        border: '1px solid var(--drift)',
        background: 'var(--tint-drift)',
        borderRadius: 5,
        padding: '12px 16px',
        fontSize: 13.5,
      }}
    >
      <strong>New gains can move this axis unexpectedly.</strong> Keep people clear. Follow the site’s
      lockout/tagout and machine-safety procedures and local codes; only authorised and competent people,
      reduced speed first, the emergency stop in reach. Polewright is not a safety function. {children}
    </div>
  );
}
