import createClient, { type Middleware } from 'openapi-fetch';
import type { components, paths } from './schema';
import { getAccessToken, refreshSession } from './session';

export type Schemas = components['schemas'];
type ProblemDetails = Schemas['ProblemDto'];

/** What the service answered instead of what was asked for; `detail` is meant for people. */
export class Problem extends Error {
  constructor(
    readonly status: number,
    readonly details: Partial<ProblemDetails>,
  ) {
    super(details.detail ?? details.title ?? `The service answered ${status}`);
    this.name = 'Problem';
  }
}

const authorization: Middleware = {
  onRequest({ request }) {
    const token = getAccessToken();
    if (token) request.headers.set('authorization', `Bearer ${token}`);
    return request;
  },
};

/** An expired access token is renewed once and the request sent again; what fails then is the person's sign-in. */
async function fetchAgain(request: Request): Promise<Response> {
  const again = request.clone();
  const response = await fetch(request);
  if (response.status !== 401 || !(await refreshSession())) return response;
  again.headers.set('authorization', `Bearer ${getAccessToken()}`);
  return fetch(again);
}

export const client = createClient<paths>({ baseUrl: window.location.origin, fetch: fetchAgain });
client.use(authorization);

/** The answer of a request, or a `Problem`. */
export async function answer<T>(
  request: Promise<{ data?: T; error?: unknown; response: Response }>,
): Promise<T> {
  const { data, error, response } = await request;
  if (!response.ok) throw new Problem(response.status, typeof error === 'object' && error ? error : {});
  return data as T;
}
