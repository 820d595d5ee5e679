import { useEffect, useSyncExternalStore } from 'react';
import { io, type Socket } from 'socket.io-client';
import type { Schemas } from './client';
import { queryClient } from './query-client';
import { getAccessToken, getSession, onSession, refreshSession } from './session';

type AxisDto = Schemas['AxisDto'];
export type StripPoint = [second: number, error: number, output: number, atLimitPct: number];

export interface LiveTile {
  id: number;
  state: AxisDto['state'];
  stateReason: string;
  indicators: {
    peakFollowingError: number | null;
    rmsFollowingError: number | null;
    saturatedPct: number | null;
    at: string;
  } | null;
  estimate: Pick<Schemas['AxisEstimateDto'], 'gain' | 'pole' | 'lnCovariance'> | null;
  seconds: StripPoint[];
}

export interface LiveTrace {
  axisId: number;
  time: number[];
  target: number[];
  position: number[];
  output: number[];
}

interface LiveValues {
  at: string;
  tiles: LiveTile[];
  trace: LiveTrace | null;
}

interface Changed {
  what: 'alert' | 'proposal' | 'axis' | 'rota' | 'person';
  id: number;
  axisId: number | null;
}

export interface Watch {
  fleet?: boolean;
  axes?: number[];
  trace?: number;
  /** Points a second that the trace's chart can show. */
  traceRate?: number;
}

/** Whether values arrive, and when the last ones did. */
interface LiveStatus {
  connected: boolean;
  lastAt: Date | null;
}

let socket: Socket | null = null;
let watch: Watch = {};
let status: LiveStatus = { connected: false, lastAt: null };
const statusListeners = new Set<() => void>();
const valueListeners = new Set<(values: LiveValues) => void>();

/** Queries that a change makes old, by what changed. */
const OLD_AFTER: Record<Changed['what'], string[]> = {
  alert: ['alerts', 'summary', 'axes', 'axis'],
  proposal: ['proposals', 'proposal', 'summary', 'axes', 'axis'],
  axis: ['axes', 'axis', 'summary', 'tunings'],
  rota: ['rota', 'on-call'],
  person: ['people'],
};

/** How long further changes are waited for before a query is asked again, ms: the list of a whole fleet is long, and a
 * tile's state comes with the live values anyway. */
const SETTLES_MS: Record<string, number> = { axes: 2_000 };

function setStatus(next: Partial<LiveStatus>): void {
  status = { ...status, ...next };
  for (const listener of statusListeners) listener();
}

function connect(): void {
  socket = io('/live', {
    transports: ['websocket'],
    auth: (give) => give({ token: getAccessToken() }),
  });
  socket.on('connect', () => {
    setStatus({ connected: true });
    socket?.emit('watch', watch);
    // What changed while the connection was lost is not known.
    void queryClient.invalidateQueries();
  });
  socket.on('disconnect', () => setStatus({ connected: false }));
  socket.on('connect_error', (error) => {
    setStatus({ connected: false });
    // The token may have run out while the page slept.
    if (error.message.includes('sign in'))
      void refreshSession()
        .then((again) => again && setTimeout(() => socket?.connect(), 1_000))
        .catch(() => undefined);
  });
  socket.on('values', (values: LiveValues, done: () => void) => {
    done();
    setStatus({ lastAt: new Date(values.at) });
    for (const listener of valueListeners) listener(values);
  });
  const pending = new Set<string>();
  socket.on('changed', ({ what }: Changed) => {
    for (const key of OLD_AFTER[what]) {
      if (pending.has(key)) continue;
      pending.add(key);
      setTimeout(() => {
        pending.delete(key);
        void queryClient.invalidateQueries({ queryKey: [key] });
      }, SETTLES_MS[key] ?? 250);
    }
  });
}

/** The live connection follows the sign-in. */
export function followSession(): () => void {
  const follow = (): void => {
    const wanted = getSession().status === 'signed-in';
    if (wanted && !socket) connect();
    if (!wanted && socket) {
      socket.disconnect();
      socket = null;
      setStatus({ connected: false, lastAt: null });
      queryClient.clear();
    }
  };
  follow();
  return onSession(follow);
}

/** Tells the service what this page shows, and hands over what arrives. */
export function useLiveValues(wanted: Watch, onValues: (values: LiveValues) => void): void {
  const key = JSON.stringify(wanted);
  useEffect(() => {
    watch = JSON.parse(key) as Watch;
    socket?.emit('watch', watch);
    return () => {
      watch = {};
      socket?.emit('watch', watch);
    };
  }, [key]);
  useEffect(() => {
    valueListeners.add(onValues);
    return () => void valueListeners.delete(onValues);
  }, [onValues]);
}

export const useLiveStatus = (): LiveStatus =>
  useSyncExternalStore(
    (listener) => {
      statusListeners.add(listener);
      return () => void statusListeners.delete(listener);
    },
    () => status,
  );
