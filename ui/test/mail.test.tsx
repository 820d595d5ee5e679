import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import { Component as MailPage } from '../src/features/mail/mail-page';
import { refusal, serviceOfTests, showPage } from './show-page';

const service = serviceOfTests();

const mailOf = (differs: Partial<Schemas['MailDto']>): Schemas['MailDto'] => ({
  id: 3,
  to: 'bo@tarnwick.example',
  subject: 'PR-01 ram: output at its limit',
  state: 'failed',
  attempts: 6,
  createdAt: new Date().toISOString(),
  sentAt: null,
  error: 'connection refused',
  alertId: 7,
  channel: 'mail',
  perhapsAgain: false,
  groupId: null,
  ...differs,
});

const message = (html: string, text: string): Schemas['DemoMessageDto'] => ({
  id: 'm1',
  at: new Date().toISOString(),
  from: 'polewright@tarnwick.example',
  to: 'bo@tarnwick.example',
  subject: 'PR-01 ram: output at its limit',
  text,
  html,
});

test('the outbox says what failed and why, and sends it again', async () => {
  service.current.list('/api/v1/mail/outbox', [mailOf({})]);
  service.current.list('/api/v1/mail/demo-inbox', []);
  service.current.on('POST /api/v1/mail/outbox/3/resend', () => {
    service.current.list('/api/v1/mail/outbox', [mailOf({ state: 'queued', attempts: 0, error: null })]);
    return { status: 200, body: mailOf({ state: 'queued' }) };
  });
  showPage(MailPage, '/admin/mail', 'administrator');
  const outbox = await screen.findByRole('region', { name: 'Outbox' });
  expect(within(outbox).getByText('tried 6 times: connection refused')).toBeInTheDocument();
  expect(within(outbox).getByRole('link', { name: /output at its limit/ })).toHaveAttribute(
    'href',
    '/alerts/7',
  );
  await userEvent.click(within(outbox).getByRole('button', { name: /^Send again/ }));
  await waitFor(() => expect(within(outbox).getByText('waits')).toBeInTheDocument());
  expect(within(outbox).queryByRole('button', { name: /^Send again/ })).toBeNull();
});

test('only administrators ask for the outbox', async () => {
  service.current.list('/api/v1/mail/demo-inbox', []);
  showPage(MailPage, '/admin/mail', 'technician');
  expect(await screen.findByText(/No mail has arrived yet/)).toBeInTheDocument();
  expect(service.current.bodies('GET /api/v1/mail/outbox')).toEqual([]);
});

test('a letter is shown without scripts and without our origin; its links leave the frame', async () => {
  service.current.list('/api/v1/mail/demo-inbox', [message('<p>Hello</p>', 'Hello')]);
  showPage(MailPage, '/admin/mail', 'viewer');
  await userEvent.click(await screen.findByRole('button', { name: /PR-01 ram/ }));
  const letter = screen.getByTitle('PR-01 ram: output at its limit');
  const sandbox = letter.getAttribute('sandbox')!.split(' ');
  expect(sandbox).not.toContain('allow-scripts');
  expect(sandbox).not.toContain('allow-same-origin');
  expect(sandbox).toContain('allow-popups-to-escape-sandbox');
  expect(letter.getAttribute('srcdoc')).toBe('<base target="_blank"><p>Hello</p>');
});

test('a mail of plain text stays text', async () => {
  service.current.list('/api/v1/mail/demo-inbox', [message('', 'a < b & <img src=x>')]);
  showPage(MailPage, '/admin/mail', 'viewer');
  await userEvent.click(await screen.findByRole('button', { name: /PR-01 ram/ }));
  expect(screen.getByTitle(/PR-01 ram/).getAttribute('srcdoc')).toContain('a &lt; b &amp; &lt;img src=x>');
});

test('no demo: says where mails go', async () => {
  service.current.on('GET /api/v1/mail/demo-inbox', () => refusal(404, 'There is no demo inbox'));
  showPage(MailPage, '/admin/mail', 'viewer');
  expect(await screen.findByText('No demo inbox here')).toBeInTheDocument();
});
