import { MantineProvider } from '@mantine/core';
import { cleanNotifications, Notifications } from '@mantine/notifications';
import { QueryClientProvider } from '@tanstack/react-query';
import { configure, render } from '@testing-library/react';
import type { ComponentType } from 'react';
import { createMemoryRouter, RouterProvider } from 'react-router-dom';
import { afterEach, beforeEach, vi } from 'vitest';
import type { Role } from '../src/api/policy';
import { queryClient } from '../src/api/query-client';
import { signedIn, signedOut } from '../src/api/session';

// A busy machine renders a page of forms in more than the second that the library waits.
configure({ asyncUtilTimeout: 8_000 });
// jsdom has no font loading, which a text area that grows listens to.
Object.defineProperty(document, 'fonts', { value: new EventTarget() });

interface Answer {
  status: number;
  body?: unknown;
}

/** The service, as far as a page asks it: answers by method and path, and what was asked of it. */
export class FakeService {
  readonly asked: { method: string; path: string; body: unknown }[] = [];
  private readonly answers = new Map<string, (body: unknown) => Answer>();

  /** `request` is method and path, such as "GET /api/v1/sites"; the later answer replaces the former. */
  on(request: string, answer: (body: unknown) => Answer): void {
    this.answers.set(request, answer);
  }

  /** Answers a list request. */
  list(path: string, items: unknown[]): void {
    this.on(`GET ${path}`, () => ({ status: 200, body: { items, nextCursor: null } }));
  }

  /** Bodies of the requests to a method and path, oldest first. */
  bodies(request: string): unknown[] {
    return this.asked.filter(({ method, path }) => `${method} ${path}` === request).map(({ body }) => body);
  }

  readonly fetch = async (request: Request): Promise<Response> => {
    const { pathname } = new URL(request.url);
    const text = request.method === 'GET' ? '' : await request.text();
    const json = request.headers.get('content-type') === 'application/json';
    const body: unknown = text && json ? JSON.parse(text) : text || null;
    this.asked.push({ method: request.method, path: pathname, body });
    const answer = this.answers.get(`${request.method} ${pathname}`)?.(body) ?? refusal(404, pathname);
    return new Response(answer.body === undefined ? null : JSON.stringify(answer.body), {
      status: answer.status,
      headers: { 'content-type': 'application/json' },
    });
  };
}

/** RFC 9457 problem details, as the service refuses. */
export const refusal = (
  status: number,
  detail: string,
  errors?: { path: string; message: string }[],
): Answer => ({ status, body: { type: 'about:blank', title: 'Refused', status, detail, errors } });

/** A fresh service for each test; nobody stays signed in. */
export function serviceOfTests(): { current: FakeService } {
  const holder = { current: new FakeService() };
  beforeEach(() => {
    holder.current = new FakeService();
    holder.current.list('/api/v1/sites', [{ id: 1, name: 'Tile Hall', timeZone: 'Europe/London' }]);
    vi.stubGlobal('fetch', holder.current.fetch);
  });
  afterEach(() => {
    queryClient.clear();
    cleanNotifications();
    signedOut();
    vi.unstubAllGlobals();
  });
  return holder;
}

export const ADA = { id: 1, name: 'Ada Fenn', email: 'ada@tarnwick.example' };

/** Renders a page at a path; `role` is Ada's on site 1, null when nobody is signed in. */
export function showPage(Page: ComponentType, at: string, role: Role | null, route = at): void {
  if (role)
    signedIn({
      accessToken: 'token',
      user: { ...ADA, owner: false, roles: [{ siteId: 1, role }] },
    });
  const router = createMemoryRouter(
    [
      { path: route, element: <Page /> },
      { path: '*', element: <p>elsewhere</p> },
    ],
    { initialEntries: [at] },
  );
  render(
    <MantineProvider env="test">
      <Notifications />
      <QueryClientProvider client={queryClient}>
        <RouterProvider router={router} />
      </QueryClientProvider>
    </MantineProvider>,
  );
}
