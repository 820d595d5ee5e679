import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { describe, expect, test } from 'vitest';
import type { Role } from '../src/api/policy';
import { edgeOf } from '../src/features/alerts/alert-card';
import type { Alert } from '../src/features/alerts/alerts-api';
import { Component as AlertPage } from '../src/features/alerts/alert-page';
import { Component as AlertsPage } from '../src/features/alerts/alerts-page';
import { alertOf, RAISED } from './alert-of';
import { ADA, refusal, showPage, serviceOfTests } from './show-page';

const service = serviceOfTests();
const listed = (...alerts: Alert[]): void => service.current.list('/api/v1/alerts', alerts);

function show(role: Role, ...alerts: Alert[]): void {
  listed(...alerts);
  showPage(AlertsPage, '/alerts', role);
}

describe('the alerts page', () => {
  test('one tap acknowledges, and the card then says who did', async () => {
    show('technician', alertOf({}));
    expect(await screen.findByText('Unacknowledged, high')).toBeInTheDocument();
    expect(screen.getByRole('status')).toHaveTextContent('1 waits for somebody · 0 acknowledged');
    const taken = alertOf({
      state: 'acknowledged',
      acknowledgedBy: ADA.name,
      acknowledgedAt: new Date().toISOString(),
    });
    service.current.on('POST /api/v1/alerts/7/acknowledge', () => {
      listed(taken);
      return { status: 200, body: taken };
    });
    await userEvent.click(screen.getByRole('button', { name: 'Acknowledge' }));
    expect(await screen.findByText(/by Ada Fenn/)).toBeInTheDocument();
    expect(screen.queryByRole('button', { name: 'Acknowledge' })).toBeNull();
    expect(screen.getByRole('status')).toHaveTextContent('Nothing waits · 1 acknowledged');
  });

  test('a refused acknowledgement says why and leaves the button', async () => {
    show('technician', alertOf({}));
    service.current.on('POST /api/v1/alerts/7/acknowledge', () =>
      refusal(409, 'Alert 7 is shelved; it cannot be acknowledged now'),
    );
    await userEvent.click(await screen.findByRole('button', { name: 'Acknowledge' }));
    expect(await screen.findByRole('alert')).toHaveTextContent('Alert 7 is shelved');
    await waitFor(() => expect(screen.getByRole('button', { name: 'Acknowledge' })).toBeEnabled());
  });

  test('a viewer reads what is wrong and what to do, and is offered nothing to press but links', async () => {
    show('viewer', alertOf({}));
    expect(await screen.findByText(/Output at its limit for 18.4 %/)).toBeInTheDocument();
    expect(screen.getByText(/check supply pressure/)).toBeInTheDocument();
    expect(screen.queryByRole('button', { name: /Acknowledge|Shelve/ })).toBeNull();
    expect(screen.getByRole('link', { name: 'Open axis' })).toHaveAttribute('href', '/axes/3');
  });

  test('tells who was told since it was raised, and not before', async () => {
    const before = new Date(Date.parse(RAISED) - 3_600_000).toISOString();
    const after = new Date(Date.parse(RAISED) + 60_000).toISOString();
    show(
      'technician',
      alertOf({
        events: [
          { at: before, by: 'service', action: 'told', note: 'Bo Lund by mail' },
          { at: after, by: 'service', action: 'told', note: 'Ada Fenn by mail' },
        ],
      }),
    );
    const told = await screen.findByRole('list', { name: 'Who was told' });
    expect(within(told).getAllByRole('listitem')).toHaveLength(1);
    expect(told).toHaveTextContent('Told: Ada Fenn by mail');
  });

  test('nothing open: says so', async () => {
    show('technician');
    expect(await screen.findByText('Nothing needs you')).toBeInTheDocument();
  });

  test('an answer that fails is no endless wait, and can be asked for again', async () => {
    service.current.on('GET /api/v1/alerts', () => refusal(403, 'You have no role on a site'));
    showPage(AlertsPage, '/alerts', 'technician');
    expect(await screen.findByRole('alert')).toHaveTextContent('You have no role on a site');
    listed(alertOf({}));
    await userEvent.click(screen.getByRole('button', { name: 'Try again' }));
    expect(await screen.findByText('Unacknowledged, high')).toBeInTheDocument();
  });
});

test('marks, what happens otherwise and by when; out of service with a reason on the alert’s own page', async () => {
  const alert = alertOf({
    chattering: true,
    stale: true,
    levelUnknownSince: RAISED,
    consequence: 'Parts are made out of tolerance.',
    respondBy: RAISED,
  });
  const out = alertOf({
    state: 'out-of-service',
    outOfServiceBy: ADA.name,
    outOfServiceReason: 'Encoder on order',
  });
  service.current.on('GET /api/v1/alerts/7', () => ({ status: 200, body: alert }));
  service.current.on('POST /api/v1/alerts/7/take-out-of-service', () => {
    service.current.on('GET /api/v1/alerts/7', () => ({ status: 200, body: out }));
    return { status: 200, body: out };
  });
  showPage(AlertPage, '/alerts/7', 'engineer', '/alerts/:id');
  const marks = await screen.findByRole('list', { name: 'Marks' });
  expect(within(marks).getAllByRole('listitem')).toHaveLength(3);
  expect(screen.getByText(/If nothing is done: Parts are made out of tolerance/)).toHaveTextContent(
    'Respond by',
  );
  await userEvent.click(screen.getByRole('button', { name: 'Take out of service …' }));
  const dialog = await screen.findByRole('dialog');
  expect(within(dialog).getByRole('button', { name: 'Take it out of service' })).toBeDisabled();
  await userEvent.type(within(dialog).getByLabelText(/^Reason/), 'Encoder on order');
  await userEvent.click(within(dialog).getByRole('button', { name: 'Take it out of service' }));
  expect(await screen.findByText(/by Ada Fenn: Encoder on order/)).toBeInTheDocument();
  expect(screen.getByRole('button', { name: 'Return to service' })).toBeInTheDocument();
  expect(service.current.bodies('POST /api/v1/alerts/7/take-out-of-service')).toEqual([
    { reason: 'Encoder on order' },
  ]);
});

describe('shelving', () => {
  test('wants a reason, keeps it when refused, and ends when the site’s clock says', async () => {
    show('technician', alertOf({ timeZone: 'America/New_York' }));
    const path = '/api/v1/alerts/7/shelve';
    service.current.on(`POST ${path}`, () => refusal(400, 'until: must be within 30 days'));
    await userEvent.click(await screen.findByRole('button', { name: 'Shelve …' }));
    const dialog = await screen.findByRole('dialog');
    expect(within(dialog).getByRole('button', { name: 'Shelve it' })).toBeDisabled();
    await userEvent.type(within(dialog).getByLabelText(/^Reason/), 'New pump on order');
    await userEvent.click(within(dialog).getByRole('radio', { name: 'Other' }));
    const until = within(dialog).getByLabelText(/^Until/);
    await userEvent.clear(until);
    expect(within(dialog).getByRole('button', { name: 'Shelve it' })).toBeDisabled();
    await userEvent.type(until, '2031-07-01T12:30');
    await userEvent.click(within(dialog).getByRole('button', { name: 'Shelve it' }));
    expect(await within(dialog).findByRole('alert')).toHaveTextContent('must be within 30 days');
    expect(within(dialog).getByLabelText(/^Reason/)).toHaveValue('New pump on order');
    service.current.on(`POST ${path}`, () => ({
      status: 200,
      body: alertOf({ state: 'shelved', shelvedUntil: '2031-07-01T16:30:00.000Z' }),
    }));
    await userEvent.click(within(dialog).getByRole('button', { name: 'Shelve it' }));
    await waitFor(() => expect(screen.queryByRole('dialog')).toBeNull());
    // 12:30 in New York in July is 16:30 UTC.
    expect(service.current.bodies(`POST ${path}`)).toEqual([
      { until: '2031-07-01T16:30:00.000Z', reason: 'New pump on order' },
      { until: '2031-07-01T16:30:00.000Z', reason: 'New pump on order' },
    ]);
  });
});

test('the edge: broken for what needs somebody now, tilted once taken or low, level between ticks when held', () => {
  const edges = (
    [
      ['unacknowledged', 'high'],
      ['unacknowledged', 'medium'],
      ['unacknowledged', 'low'],
      ['acknowledged', 'high'],
      ['shelved', 'high'],
      ['suppressed', 'high'],
      ['normal', 'high'],
    ] as const
  ).map(([state, priority]) => edgeOf(alertOf({ state, priority })));
  expect(edges).toEqual([
    'out-of-tune',
    'out-of-tune',
    'drifting',
    'drifting',
    'in-maintenance',
    'in-maintenance',
    'in-tune',
  ]);
});
