import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import axe from 'axe-core';
import { describe, expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import { Component as AcknowledgePage } from '../src/features/alerts/acknowledge-page';
import { Component as ProfilePage } from '../src/features/auth/profile-page';
import { Component as HandOverPage } from '../src/features/on-call/hand-over-page';
import { Component as RatesPage } from '../src/features/on-call/rates-page';
import { refusal, serviceOfTests, showPage } from './show-page';

const service = serviceOfTests();
const at = (hours: number): string => new Date(Date.now() + hours * 3_600_000).toISOString();
/** What axe finds; colours are not laid out here, the browser tests look at them. */
const violations = async () =>
  (
    await axe.run(document.body, {
      rules: { 'color-contrast': { enabled: false }, region: { enabled: false } },
    })
  ).violations.map(({ id, nodes }) => `${id}: ${String(nodes[0]?.target)}`);

describe('the link in a mail', () => {
  const path = '/api/v1/acknowledge/abc';
  const link: Schemas['AcknowledgeLinkDto'] = {
    state: 'open',
    alertId: 7,
    person: 'Ada Fenn',
    axisTag: 'CU-03 feed',
    axisName: 'Cutter feed',
    machineName: 'Cutter',
    siteName: 'Tile Hall',
    timeZone: 'Europe/London',
    title: 'output at its limit',
    priority: 'high',
    message: 'Saturated 12 % of the time.',
    action: 'Look at the load.',
    raisedAt: at(-1),
    acknowledgedBy: null,
    acknowledgedAt: null,
  };
  const show = (): void => showPage(AcknowledgePage, '/acknowledge/abc', null, '/acknowledge/:token');

  test('asks once more without a sign-in, and then says who acknowledged', async () => {
    let state = link;
    service.current.on(`GET ${path}`, () => ({ status: 200, body: state }));
    service.current.on(`POST ${path}`, () => {
      state = { ...link, state: 'used', acknowledgedBy: 'Ada Fenn', acknowledgedAt: at(0) };
      return { status: 200, body: state };
    });
    show();
    const button = await screen.findByRole('button', { name: 'Acknowledge as Ada Fenn' });
    expect(service.current.bodies(`POST ${path}`)).toEqual([]);
    expect(await violations()).toEqual([]);
    await userEvent.click(button);
    expect(await screen.findByText(/^Acknowledged by Ada Fenn/)).toBeInTheDocument();
    expect(screen.queryByRole('button')).toBeNull();
  });

  test('says what is wrong with a link that is over, and with one that never was', async () => {
    service.current.on(`GET ${path}`, () => ({ status: 200, body: { ...link, state: 'expired' } }));
    show();
    expect(await screen.findByText(/This link has expired/)).toBeInTheDocument();
    expect(screen.queryByRole('button')).toBeNull();
    expect(screen.getByRole('link', { name: 'Open the alert' })).toHaveAttribute('href', '/alerts/7');
  });

  test('a refusal is said beside the button', async () => {
    service.current.on(`GET ${path}`, () => ({ status: 200, body: link }));
    service.current.on(`POST ${path}`, () => refusal(403, 'This account is disabled'));
    show();
    await userEvent.click(await screen.findByRole('button'));
    expect(await screen.findByRole('alert')).toHaveTextContent('This account is disabled');
  });
});

test('the hand-over sheet names what stands, what changed, who comes next, and prints', async () => {
  const sheet: Schemas['HandOverDto'] = {
    siteId: 1,
    siteName: 'Tile Hall',
    timeZone: 'Europe/London',
    from: at(-8),
    to: at(0),
    onCall: { userId: 1, name: 'Ada Fenn', email: 'ada@tarnwick.example', until: at(1) },
    next: null,
    open: [
      {
        id: 7,
        axisTag: 'CU-03 feed',
        title: 'output at its limit',
        priority: 'high',
        state: 'unacknowledged',
        raisedAt: at(-2),
        message: 'Saturated.',
        action: 'Look at the load.',
        acknowledgedBy: null,
        shelvedUntil: null,
        shelveReason: null,
      },
    ],
    over: [],
    axes: [
      { id: 3, tag: 'CU-03 feed', name: 'Cutter feed', state: 'out-of-tune', stateReason: 'Saturates.' },
    ],
    changes: [
      { at: at(-1), by: 'Bo Lund', action: 'axis.maintenance', subject: 'axis CU-03 feed', note: 'Grease' },
    ],
    notes: [{ id: 1, at: at(-3), by: 'Bo Lund', text: 'Quiet.' }],
  };
  service.current.on('GET /api/v1/on-call/hand-over/1', () => ({ status: 200, body: sheet }));
  showPage(HandOverPage, '/rota/1/hand-over', 'technician', '/rota/:siteId/hand-over');
  expect(await screen.findByText('nobody')).toBeInTheDocument();
  const open = screen.getByRole('heading', { name: 'Open alerts (1)' }).closest('section')!;
  expect(within(open).getByText('Do: Look at the load.')).toBeInTheDocument();
  expect(screen.getByText('maintenance: axis CU-03 feed')).toBeInTheDocument();
  expect(screen.getByText('Quiet.')).toBeInTheDocument();
  expect(screen.getByRole('button', { name: 'Print' })).toBeInTheDocument();
  expect(await violations()).toEqual([]);
});

test('the rates stand beside the published figures, and the chart can be read by keyboard and as a table', async () => {
  const rates: Schemas['RatesDto'] = {
    siteId: 1,
    timeZone: 'Europe/London',
    from: at(-48),
    to: at(0),
    alerts: 340,
    perDay: 170,
    days: [
      { date: '2026-11-29', alerts: 20 },
      { date: '2026-11-30', alerts: 320 },
    ],
    people: [
      {
        userId: 1,
        name: 'Ada Fenn',
        hoursOnCall: 48,
        alerts: 340,
        perDay: 170,
        busiestDay: 320,
        load: 'too many',
      },
    ],
    floods: [{ from: at(-5), to: at(-4), alerts: 60 }],
    floodPct: 2.1,
    frequent: [
      {
        axisId: 3,
        axisTag: 'CU-03 feed',
        title: 'output at its limit',
        alerts: 300,
        sharePct: 88,
        chattering: true,
      },
    ],
    chattering: [],
    standing: [],
    acknowledging: [
      { priority: 'high', alerts: 340, unanswered: 4, medianSeconds: 45, ninthDecileSeconds: 7_200 },
    ],
    published: {
      acceptablePerDay: 150,
      manageablePerDay: 300,
      floodAlerts: 10,
      source: 'ANSI/ISA-18.2-2016 and EEMUA 191, from memory',
    },
  };
  service.current.on('GET /api/v1/on-call/rates', () => ({ status: 200, body: rates }));
  showPage(RatesPage, '/alerts/rates', 'engineer');
  expect(await screen.findByText(/about 150 a day is acceptable, 300 the most/)).toBeInTheDocument();
  expect(screen.getByText('too many')).toBeInTheDocument();
  expect(screen.getByText('2.0 h')).toBeInTheDocument();
  const chart = screen.getByRole('img', { name: /Alerts a day over 2 days, 320 on the busiest/ });
  chart.focus();
  await userEvent.keyboard('{ArrowLeft}');
  await waitFor(() => expect(screen.getByText('29 Nov: 20 alerts')).toBeInTheDocument());
  await userEvent.click(screen.getByText('The same as a table'));
  expect(await screen.findByRole('region', { name: 'Table of Alerts' })).toHaveTextContent('30 Nov320');
  expect(await violations()).toEqual([]);
});

describe('how one is told', () => {
  const choices: Schemas['ChoicesDto'] = {
    dailyDigest: true,
    phone: null,
    smsAlerts: false,
    smsOffered: true,
    pushKey: 'key',
    subscriptions: [
      { id: 4, endpoint: 'https://push.example/a', browser: 'Firefox on Android', createdAt: at(-1) },
    ],
  };
  const show = (differs: Partial<typeof choices>, role: 'engineer' | 'technician'): void => {
    service.current.on('GET /api/v1/notification-choices', () => ({
      status: 200,
      body: { ...choices, ...differs },
    }));
    showPage(ProfilePage, '/profile', role);
  };

  test('SMS wants a number; what is chosen is saved', async () => {
    show({}, 'engineer');
    service.current.on('PUT /api/v1/notification-choices', () => ({ status: 200, body: choices }));
    await userEvent.click(await screen.findByLabelText('Alerts also by SMS'));
    await userEvent.click(screen.getByRole('button', { name: 'Save my choices' }));
    expect(await screen.findByText('A number such as +44 1632 960123')).toBeInTheDocument();
    await userEvent.type(screen.getByLabelText('Phone number'), '+44 1632 960123');
    await userEvent.click(screen.getByLabelText(/One mail each morning/));
    await userEvent.click(screen.getByRole('button', { name: 'Save my choices' }));
    expect(await screen.findByText('Your choices are saved.')).toBeInTheDocument();
    expect(service.current.bodies('PUT /api/v1/notification-choices')).toEqual([
      { dailyDigest: false, smsAlerts: true, phone: '+441632960123' },
    ]);
    expect(await violations()).toEqual([]);
  });

  test('a browser is taken off the list; a browser that cannot says so; no SMS where none is offered', async () => {
    show({ smsOffered: false }, 'technician');
    service.current.on('DELETE /api/v1/notification-choices/browsers/4', () => {
      service.current.on('GET /api/v1/notification-choices', () => ({
        status: 200,
        body: { ...choices, smsOffered: false, subscriptions: [] },
      }));
      return { status: 204 };
    });
    await userEvent.click(await screen.findByRole('button', { name: /off for Firefox on Android/ }));
    await waitFor(() => expect(screen.queryByText('Firefox on Android')).toBeNull());
    expect(screen.getByText(/cannot show push messages/)).toBeInTheDocument();
    expect(screen.queryByLabelText('Alerts also by SMS')).toBeNull();
  });
});
