import { screen, waitFor } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { beforeEach, describe, expect, test, vi } from 'vitest';
import type { Schemas } from '../src/api/client';
import { flush } from '../src/api/kept-acknowledgements';
import { signedIn } from '../src/api/session';
import { Component as AlertsPage } from '../src/features/alerts/alerts-page';
import { alertOf } from './alert-of';
import { ADA, refusal, serviceOfTests, showPage } from './show-page';

// The live connection is lost, after it had stood.
vi.mock('../src/api/live', () => ({ useLiveStatus: () => ({ connected: false, lastAt: new Date() }) }));

const service = serviceOfTests();
const PATH = 'POST /api/v1/alerts/7/acknowledge';
const listed = (...alerts: Schemas['AlertDto'][]): void => service.current.list('/api/v1/alerts', alerts);
/** The connection is gone for all that changes something. */
const cut = (): void => {
  const { fetch } = service.current;
  vi.stubGlobal('fetch', (request: Request) =>
    request.method === 'POST' ? Promise.reject(new TypeError('Failed to fetch')) : fetch(request),
  );
};
const mend = (): void => {
  vi.stubGlobal('fetch', service.current.fetch);
};
const kept = (): unknown[] => JSON.parse(localStorage.getItem('polewright-kept-acknowledgements') ?? '[]');

beforeEach(async () => {
  // Whatever a test left is answered.
  service.current.on(PATH, () => refusal(409, 'Acknowledged already'));
  signedIn({ accessToken: 'token', user: { ...ADA, owner: false, roles: [] } });
  await flush();
  service.current.asked.length = 0;
});

async function pressWithoutConnection(): Promise<void> {
  listed(alertOf({}));
  showPage(AlertsPage, '/alerts', 'technician');
  const button = await screen.findByRole('button', { name: 'Acknowledge' });
  cut();
  await userEvent.click(button);
  await screen.findByText(/acknowledgement is kept here/);
}

describe('an acknowledgement without a connection', () => {
  test('is kept, says so, and goes out once when the connection is back', async () => {
    await pressWithoutConnection();
    expect(screen.queryByRole('button', { name: 'Acknowledge' })).toBeNull();
    expect(screen.getByText(/no connection, last update \d\d:\d\d/)).toBeInTheDocument();
    await flush();
    expect(kept()).toHaveLength(1);
    service.current.on(PATH, () => {
      const taken = alertOf({
        state: 'acknowledged',
        acknowledgedBy: 'Ada Fenn',
        acknowledgedAt: alertOf({}).raisedAt,
      });
      listed(taken);
      return { status: 200, body: taken };
    });
    mend();
    await flush();
    await flush();
    expect(service.current.bodies(PATH)).toEqual([
      { note: expect.stringMatching(/^Pressed at \d\d:\d\d:\d\d UTC without a connection$/) },
    ]);
    expect(kept()).toEqual([]);
    await waitFor(() => expect(screen.queryByText(/acknowledgement is kept here/)).toBeNull());
    expect(await screen.findByText(/by Ada Fenn/)).toBeInTheDocument();
  });

  test('whose answer was lost ends with the service’s word that it is acknowledged', async () => {
    await pressWithoutConnection();
    mend();
    await flush();
    expect(service.current.bodies(PATH)).toHaveLength(1);
    expect(kept()).toEqual([]);
  });

  test('stays with the person who pressed it', async () => {
    await pressWithoutConnection();
    mend();
    signedIn({ accessToken: 'other', user: { ...ADA, id: 99, owner: false, roles: [] } });
    await flush();
    expect(service.current.bodies(PATH)).toEqual([]);
    expect(kept()).toHaveLength(1);
  });

  test('that the service refuses at once is not kept', async () => {
    service.current.on(PATH, () => refusal(409, 'Alert 7 is shelved'));
    listed(alertOf({}));
    showPage(AlertsPage, '/alerts', 'technician');
    await userEvent.click(await screen.findByRole('button', { name: 'Acknowledge' }));
    expect(await screen.findByText('Alert 7 is shelved')).toBeInTheDocument();
    expect(kept()).toEqual([]);
  });
});
