import type { ReactNode } from 'react';
import { StateEdge } from '../../components/state-edge';

/** The sheet that people see before they are signed in. */
export function FrontDoor({ title, children }: { title: string; children: ReactNode }) {
  return (
    <main style={{ minHeight: '100dvh', display: 'grid', placeItems: 'center', padding: 16 }}>
      <title>{`${title} · Polewright`}</title>
      <div style={{ width: '100%', maxWidth: 400 }}>
        <div
          style={{
            display: 'flex',
            alignItems: 'center',
            gap: 10,
            fontWeight: 640,
            fontSize: 20,
            marginBottom: 26,
          }}
        >
          <img src="/mark.svg" alt="" width={28} height={28} />
          Polewright
        </div>
        <div className="card" style={{ borderTop: 0, paddingTop: 22 }}>
          <StateEdge state="in-tune" />
          <h1 style={{ marginBottom: 16 }}>{title}</h1>
          {children}
        </div>
      </div>
    </main>
  );
}
