import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { describe, expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import type { Role } from '../src/api/policy';
import { Component as RotaPage } from '../src/features/rota/rota-page';
import { ADA, refusal, serviceOfTests, showPage } from './show-page';

const HOUR = 3_600_000;
const at = (hours: number): string => new Date(Date.now() + hours * HOUR).toISOString();
const BO = { id: 2, name: 'Bo Lund' };

const rotaOf = (differs: Partial<Schemas['RotaDto']>): Schemas['RotaDto'] => ({
  siteId: 1,
  timeZone: 'America/New_York',
  layer: {
    members: [
      { userId: ADA.id, name: ADA.name },
      { userId: BO.id, name: BO.name },
    ],
    handOverTime: '06:00',
    rotationDays: 7,
    startDate: '2026-11-30',
  },
  overrides: [],
  shifts: [
    { from: at(-1), to: at(7), userId: ADA.id, name: ADA.name, override: false },
    { from: at(7), to: at(31), userId: BO.id, name: BO.name, override: true },
  ],
  onCall: { userId: ADA.id, name: ADA.name, email: ADA.email, until: at(7) },
  gaps: [],
  ...differs,
});

const service = serviceOfTests();

function show(role: Role, rota = rotaOf({})): void {
  service.current.on('GET /api/v1/rota', () => ({ status: 200, body: rota }));
  service.current.list('/api/v1/rota/1/notes', [{ id: 4, at: at(-2), by: BO.name, text: 'Pump 2 hums' }]);
  service.current.list('/api/v1/people', [
    {
      ...BO,
      email: 'bo@tarnwick.example',
      roles: [{ siteId: 1, siteName: 'Tile Hall', role: 'technician' }],
      disabled: false,
      lastSignInAt: null,
      invited: false,
    },
  ]);
  showPage(RotaPage, '/rota', role);
}

describe('who is on call', () => {
  test('names the person, who stands in, and every gap in words', async () => {
    show('viewer', rotaOf({ gaps: [{ from: '2027-01-04T11:00:00Z', to: '2027-01-05T11:00:00Z' }] }));
    const site = await screen.findByRole('region', { name: 'Tile Hall' });
    expect(await within(site).findByText('On call now:', { exact: false })).toHaveTextContent(
      'On call now: Ada Fenn until',
    );
    // 11:00 UTC in January is 06:00 in New York.
    expect(within(site).getByText('Nobody on call Mon 4 Jan 06:00 to Tue 5 Jan 06:00')).toBeInTheDocument();
    const rows = within(site).getAllByRole('row');
    expect(rows[1]).toHaveTextContent('Ada Fenn, now');
    expect(rows[2]).toHaveTextContent('Bo Lund stands in');
    expect(screen.getByText('Pump 2 hums')).toBeInTheDocument();
  });

  test('a gap now is said first', async () => {
    show('viewer', rotaOf({ onCall: null }));
    expect(await screen.findByText('Nobody is on call now: alerts reach no one.')).toBeInTheDocument();
  });

  test('a viewer changes nothing', async () => {
    show('viewer');
    expect(await screen.findByText('Pump 2 hums')).toBeInTheDocument();
    expect(screen.queryByRole('button', { name: /override|rotation|Leave it/i })).toBeNull();
  });
});

describe('an override', () => {
  const path = 'POST /api/v1/rota/1/overrides';

  test('times are the site’s, whatever clock the browser has; a refusal keeps what was typed', async () => {
    show('technician');
    service.current.on(path, () => refusal(403, 'You may take over yourself or hand on your own time'));
    const from = await screen.findByLabelText('From');
    const to = screen.getByLabelText('To');
    await userEvent.clear(from);
    await userEvent.type(from, '2027-03-14T01:30');
    await userEvent.clear(to);
    await userEvent.type(to, '2027-03-14T03:30');
    await userEvent.type(screen.getByLabelText('Reason'), 'Dentist');
    await userEvent.click(screen.getByRole('button', { name: 'Add the override' }));
    expect(await screen.findByRole('alert')).toHaveTextContent('hand on your own time');
    expect(screen.getByLabelText('Reason')).toHaveValue('Dentist');
    // Clocks in New York go forward at 02:00 on 14 March 2027: two hours on the clock are one in fact.
    expect(service.current.bodies(path)).toEqual([
      {
        userId: ADA.id,
        from: '2027-03-14T06:30:00.000Z',
        to: '2027-03-14T07:30:00.000Z',
        reason: 'Dentist',
      },
    ]);
  });

  test('an end before its beginning is not sent', async () => {
    show('technician');
    const to = await screen.findByLabelText('To');
    await userEvent.clear(to);
    await userEvent.type(to, '2020-01-01T00:00');
    await userEvent.type(screen.getByLabelText('Reason'), 'Dentist');
    await userEvent.click(screen.getByRole('button', { name: 'Add the override' }));
    expect(await screen.findByText('It must end after it begins')).toBeInTheDocument();
    expect(service.current.bodies(path)).toEqual([]);
  });

  test('removing one asks once and names it', async () => {
    const override = {
      id: 9,
      userId: BO.id,
      name: BO.name,
      from: '2027-01-04T11:00:00Z',
      to: '2027-01-05T11:00:00Z',
      reason: 'Swap',
    };
    show('technician', rotaOf({ overrides: [override] }));
    service.current.on('DELETE /api/v1/rota/1/overrides/9', () => {
      service.current.on('GET /api/v1/rota', () => ({ status: 200, body: rotaOf({}) }));
      return { status: 204 };
    });
    await userEvent.click(
      await screen.findByRole('button', { name: 'Remove the override of Bo Lund, Mon 4 Jan 06:00' }),
    );
    const dialog = await screen.findByRole('dialog', { name: 'Remove the override of Bo Lund' });
    expect(service.current.bodies('DELETE /api/v1/rota/1/overrides/9')).toEqual([]);
    await userEvent.click(within(dialog).getByRole('button', { name: 'Remove it' }));
    await waitFor(() => expect(screen.queryByText(/Override: Bo Lund/)).toBeNull());
    expect(service.current.bodies('DELETE /api/v1/rota/1/overrides/9')).toHaveLength(1);
  });
});

test('an administrator saves the rotation as shown, and is told', async () => {
  show('administrator');
  service.current.on('PUT /api/v1/rota/1', () => ({ status: 200, body: rotaOf({}) }));
  const days = await screen.findByLabelText('Days a turn');
  await userEvent.clear(days);
  await userEvent.click(screen.getByRole('button', { name: 'Save the rotation' }));
  expect(await screen.findByText('From 1 to 60')).toBeInTheDocument();
  await userEvent.type(days, '2');
  await userEvent.click(screen.getByRole('button', { name: 'Save the rotation' }));
  expect(await screen.findByText('The rotation is saved.')).toBeInTheDocument();
  expect(service.current.bodies('PUT /api/v1/rota/1')).toEqual([
    { members: [ADA.id, BO.id], handOverTime: '06:00', rotationDays: 2, startDate: '2026-11-30' },
  ]);
});

test('a note that could not be left stays in the field', async () => {
  show('technician');
  service.current.on('POST /api/v1/rota/1/notes', () => refusal(503, 'The service is starting'));
  const field = await screen.findByLabelText('New note');
  await userEvent.type(field, 'Valve 3 swapped');
  await userEvent.click(screen.getByRole('button', { name: 'Leave it' }));
  expect(await screen.findByRole('alert')).toHaveTextContent('The service is starting');
  expect(field).toHaveValue('Valve 3 swapped');
  service.current.on('POST /api/v1/rota/1/notes', () => ({
    status: 201,
    body: { id: 5, at: at(0), by: ADA.name, text: 'Valve 3 swapped' },
  }));
  await userEvent.click(screen.getByRole('button', { name: 'Leave it' }));
  await waitFor(() => expect(field).toHaveValue(''));
});
