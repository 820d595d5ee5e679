import { useSyncExternalStore } from 'react';
import { answer, client, Problem, type Schemas } from './client';
import { queryClient } from './query-client';
import { getSession, onSession } from './session';

/** An acknowledgement that could not go out yet. */
interface Kept {
  alertId: number;
  userId: number;
  /** ms since 1970: when the person pressed the button */
  at: number;
}

type Alert = Schemas['AlertDto'];

const PLACE = 'polewright-kept-acknowledgements';
/** ms between attempts while something is kept */
const PAUSE = 10_000;
/** ms; what is older than this helps nobody and is dropped */
const LONGEST = 12 * 3_600_000;

let kept: readonly Kept[] = read();
const listeners = new Set<() => void>();

function read(): Kept[] {
  try {
    return JSON.parse(localStorage.getItem(PLACE) ?? '[]') as Kept[];
  } catch {
    return [];
  }
}

function set(next: readonly Kept[]): void {
  kept = next;
  try {
    localStorage.setItem(PLACE, JSON.stringify(kept));
  } catch {
    // Without a store it is kept as long as the page is open.
  }
  for (const listener of listeners) listener();
}

/** A request that got no answer: the connection is lost, or nobody knows whether it arrived. */
const unanswered = (error: unknown): boolean =>
  !(error instanceof Problem) || [502, 503, 504].includes(error.status);

/** Asks the service to acknowledge; the time at which the button was pressed stands in the note when it was kept. */
const sendAcknowledge = (id: number, note?: string): Promise<Alert> =>
  answer(
    client.POST('/api/v1/alerts/{id}/acknowledge', {
      params: { path: { id } },
      body: { ...(note && { note }) },
    }),
  );

/** Sends an acknowledgement, or keeps it and answers null when no answer comes. Twice kept is once. */
export async function sendOrKeep(alertId: number): Promise<Alert | null> {
  try {
    return await sendAcknowledge(alertId);
  } catch (error) {
    const userId = getSession().user?.id;
    if (!unanswered(error) || userId === undefined) throw error;
    if (!kept.some((one) => one.alertId === alertId && one.userId === userId))
      set([...kept, { alertId, userId, at: Date.now() }]);
    return null;
  }
}

/**
 * Sends what the signed-in person left. Whatever the service answers ends it: it is taken, or somebody (perhaps this
 * very acknowledgement, when its answer was lost) was first.
 */
export async function flush(): Promise<void> {
  const userId = getSession().user?.id;
  for (const one of kept.filter((entry) => entry.userId === userId)) {
    const pressed = new Date(one.at).toISOString().slice(11, 19);
    try {
      if (Date.now() - one.at < LONGEST)
        await sendAcknowledge(one.alertId, `Pressed at ${pressed} UTC without a connection`);
    } catch (error) {
      if (unanswered(error) || (error as Problem).status === 401) return;
    }
    set(kept.filter((entry) => entry !== one));
    void queryClient.invalidateQueries({ queryKey: ['alerts'] });
  }
}

/** Sends what is kept at every sign of a connection, and again and again while something is. */
export function sendKept(): () => void {
  let running: Promise<void> | null = null;
  const attempt = (): void => {
    if (kept.length === 0) return;
    running ??= flush().finally(() => (running = null));
  };
  const timer = setInterval(attempt, PAUSE);
  window.addEventListener('online', attempt);
  const unfollow = onSession(attempt);
  return () => {
    clearInterval(timer);
    window.removeEventListener('online', attempt);
    unfollow();
  };
}

/** Whether the signed-in person's acknowledgement of an alert waits to go out. */
export const useKept = (alertId: number): boolean =>
  useSyncExternalStore(
    (listener) => {
      listeners.add(listener);
      return () => void listeners.delete(listener);
    },
    () => kept.some((one) => one.alertId === alertId && one.userId === getSession().user?.id),
  );
