import type { ReactNode } from 'react';

/** What may be wider than the window scrolls by itself, by keyboard too (WCAG 2.2, 2.1.1). `label` says what it is. */
export function ScrollX({
  label,
  className = '',
  children,
}: {
  label: string;
  className?: string;
  children: ReactNode;
}) {
  return (
    <div className={`scroll-x ${className}`} tabIndex={0} role="region" aria-label={label}>
      {children}
    </div>
  );
}
