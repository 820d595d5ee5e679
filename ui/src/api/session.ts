import type { components } from './schema';

export type SignedInUser = components['schemas']['SignedInUserDto'];
type SignInAnswer = components['schemas']['SessionDto'];

/** Who is signed in. The access token lives in memory only; the refresh cookie is the browser's. */
interface Session {
  status: 'opening' | 'signed-out' | 'signed-in';
  user: SignedInUser | null;
}

let session: Session = { status: 'opening', user: null };
let accessToken: string | null = null;
const listeners = new Set<() => void>();

function set(next: Session, token: string | null): void {
  session = next;
  accessToken = token;
  for (const listener of listeners) listener();
}

export const getSession = (): Session => session;
export const getAccessToken = (): string | null => accessToken;

export function onSession(listener: () => void): () => void {
  listeners.add(listener);
  return () => listeners.delete(listener);
}

export const signedIn = ({ accessToken: token, user }: SignInAnswer): void =>
  set({ status: 'signed-in', user }, token);
export const signedOut = (): void => set({ status: 'signed-out', user: null }, null);

let refreshing: Promise<boolean> | null = null;

/**
 * Gets a new access token by the refresh cookie. A cookie works once, so tabs take turns: whoever waits behind another
 * tab uses the cookie that the other one left.
 *
 * @returns whether somebody is signed in now; a network failure leaves the session as it is and throws
 */
export function refreshSession(): Promise<boolean> {
  refreshing ??= inTurn(async () => {
    const response = await fetch('/api/v1/auth/refresh', { method: 'POST', credentials: 'same-origin' });
    if (response.ok) {
      signedIn((await response.json()) as SignInAnswer);
      return true;
    }
    if (response.status >= 500) throw new Error('The service does not answer');
    signedOut();
    return false;
  }).finally(() => (refreshing = null));
  return refreshing;
}

async function inTurn<T>(work: () => Promise<T>): Promise<T> {
  return 'locks' in navigator ? await navigator.locks.request('polewright-refresh', work) : work();
}

export async function signOut(): Promise<void> {
  await fetch('/api/v1/auth/sign-out', {
    method: 'POST',
    credentials: 'same-origin',
    headers: accessToken ? { authorization: `Bearer ${accessToken}` } : {},
  }).catch(() => undefined);
  signedOut();
}
