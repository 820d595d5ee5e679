import type { ReactNode } from 'react';

/** A titled sheet of paper. */
export function Card({
  title,
  sub,
  aside,
  children,
  id,
}: {
  title: ReactNode;
  sub?: ReactNode;
  aside?: ReactNode;
  children?: ReactNode;
  id?: string;
}) {
  return (
    <section className="card" {...(id && { id })}>
      <div
        style={{
          display: 'flex',
          justifyContent: 'space-between',
          gap: 12,
          alignItems: 'baseline',
          flexWrap: 'wrap',
        }}
      >
        <h2>{title}</h2>
        {aside && <div className="small soft">{aside}</div>}
      </div>
      {sub && <div className="sub">{sub}</div>}
      {children}
    </section>
  );
}
