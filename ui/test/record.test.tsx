import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import { Component as RecordPage } from '../src/features/record/record-page';
import { serviceOfTests, showPage } from './show-page';

const service = serviceOfTests();

const ENTRY: Schemas['AuditEntryDto'] = {
  id: 41,
  at: '2026-03-02T08:15:00.000Z',
  actor: 'Ines Harrowgate',
  userId: 3,
  action: 'proposal.sent-for-review',
  subjectType: 'proposal',
  subjectId: '12',
  siteId: 1,
  note: 'Pallets are heavier',
  before: { state: 'drafted' } as never,
  after: { state: 'in review' } as never,
};

const chain = (differs: Partial<Schemas['AuditChainDto']>): Schemas['AuditChainDto'] => ({
  entries: 52,
  intact: true,
  brokenAt: null,
  reason: null,
  broken: null,
  head: 'a'.repeat(64),
  ...differs,
});

const start = (role: 'administrator' | 'engineer' | 'technician'): void => {
  service.current.list('/api/v1/sites', []);
  service.current.list('/api/v1/audit', [ENTRY]);
  showPage(RecordPage, '/admin/record', role);
};

test('an entry says who did what to what, and shows its values on demand', async () => {
  start('engineer');
  const row = await screen.findByRole('row', { name: /^41/ });
  expect(row).toHaveTextContent('Ines Harrowgate');
  expect(row).toHaveTextContent('sent for review');
  expect(within(row).getByRole('link', { name: 'proposal 12' })).toHaveAttribute('href', '/proposals/12');
  expect(screen.queryByText(/in review/)).toBeNull();
  await userEvent.click(within(row).getByRole('button', { name: 'Values of entry 41' }));
  expect(screen.getByLabelText('After, as JSON')).toHaveTextContent('{ "state": "in review" }');
  // Checking and exporting are for administrators.
  expect(screen.queryByRole('button', { name: /Check every entry|Export/ })).toBeNull();
});

test('the check says that the record is whole, or names the first bad entry', async () => {
  service.current.on('GET /api/v1/audit/chain', () => ({ status: 200, body: chain({}) }));
  start('administrator');
  await userEvent.click(await screen.findByRole('button', { name: 'Check every entry' }));
  expect(await screen.findByText(/The record is whole: 52 entries/)).toBeInTheDocument();
  service.current.on('GET /api/v1/audit/chain', () => ({
    status: 200,
    body: chain({
      entries: 16,
      intact: false,
      brokenAt: 17,
      reason: 'Its content or its hash was altered',
      broken: {
        at: '2026-03-01 07:00:00.000',
        actor: 'Mallory',
        action: 'proposal.approved',
        subjectType: 'proposal',
        subjectId: '9',
      },
    }),
  }));
  await userEvent.click(screen.getByRole('button', { name: 'Check every entry' }));
  await waitFor(() =>
    expect(
      screen.getByText(/The record is broken at entry 17: Its content or its hash was altered/),
    ).toBeInTheDocument(),
  );
  expect(screen.getByText(/It reads now: .*Mallory, proposal\.approved, proposal 9/)).toBeInTheDocument();
});

test('whoever may not read the record is told so, and it is not asked for', async () => {
  start('technician');
  expect(await screen.findByText(/for engineers and administrators/)).toBeInTheDocument();
  expect(service.current.bodies('GET /api/v1/audit')).toEqual([]);
});
