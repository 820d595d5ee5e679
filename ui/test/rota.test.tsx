import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { describe, expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import type { Role } from '../src/api/policy';
import { layerWords } from '../src/features/rota/layer-words';
import { Component as RotaPage } from '../src/features/rota/rota-page';
import { ADA, refusal, serviceOfTests, showPage } from './show-page';

const HOUR = 3_600_000;
const at = (hours: number): string => new Date(Date.now() + hours * HOUR).toISOString();
const BO = { id: 2, name: 'Bo Lund' };

const rotaOf = (differs: Partial<Schemas['RotaDto']>): Schemas['RotaDto'] => ({
  siteId: 1,
  timeZone: 'America/New_York',
  layers: [
    {
      name: 'Week by week',
      members: [
        { userId: ADA.id, name: ADA.name },
        { userId: BO.id, name: BO.name },
      ],
      handOverTime: '06:00',
      rotationDays: 7,
      startDate: '2026-11-30',
      endDate: null,
      weekdays: [1, 2, 3, 4, 5, 6, 7],
      hours: null,
    },
  ],
  overrides: [],
  swaps: [],
  available: [
    { userId: ADA.id, name: ADA.name },
    { userId: BO.id, name: BO.name },
  ],
  shifts: [
    { from: at(-1), to: at(7), userId: ADA.id, name: ADA.name, override: false, layer: 'Week by week' },
    { from: at(7), to: at(31), userId: BO.id, name: BO.name, override: true, layer: null },
  ],
  onCall: { userId: ADA.id, name: ADA.name, email: ADA.email, until: at(7) },
  gaps: [],
  ...differs,
});

const service = serviceOfTests();

function show(role: Role, rota = rotaOf({})): void {
  service.current.on('GET /api/v1/rota', () => ({ status: 200, body: rota }));
  service.current.list('/api/v1/rota/1/notes', [{ id: 4, at: at(-2), by: BO.name, text: 'Pump 2 hums' }]);
  service.current.list('/api/v1/rota/feeds', []);
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
    expect(screen.queryByRole('button', { name: /override|layer|swap|Leave it/i })).toBeNull();
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

/** Chooses from a field's own list; the lists of all fields are in the page. */
async function choose(field: HTMLElement, option: string | RegExp): Promise<void> {
  await userEvent.click(field);
  const list = await waitFor(() => document.getElementById(field.getAttribute('aria-controls') ?? '')!);
  await userEvent.click(within(list).getByRole('option', { name: option, hidden: true }));
}

describe('the layers', () => {
  const path = 'PUT /api/v1/rota/1';

  test('are saved by an administrator as shown, one over another, and said in words', async () => {
    show('administrator');
    service.current.on(path, () => ({ status: 200, body: rotaOf({}) }));
    const days = await screen.findByLabelText('Days a turn');
    await userEvent.clear(days);
    await userEvent.click(screen.getByRole('button', { name: 'Save the layers' }));
    expect(await screen.findByText('From 1 to 60')).toBeInTheDocument();
    await userEvent.type(days, '2');
    await userEvent.click(screen.getByRole('button', { name: 'Add a layer' }));
    const added = await screen.findByRole('group', { name: '2. Layer 2' });
    await userEvent.click(within(added).getByLabelText('Sat'));
    await userEvent.click(within(added).getByLabelText('Only some hours'));
    await choose(within(added).getByRole('combobox'), BO.name);
    await userEvent.click(screen.getByRole('button', { name: 'Save the layers' }));
    expect(await screen.findByText('The layers are saved.')).toBeInTheDocument();
    const [{ layers }] = service.current.bodies(path) as [{ layers: object[] }];
    expect(layers).toEqual([
      {
        name: 'Week by week',
        members: [ADA.id, BO.id],
        handOverTime: '06:00',
        rotationDays: 2,
        startDate: '2026-11-30',
        endDate: null,
        weekdays: [1, 2, 3, 4, 5, 6, 7],
        hours: null,
      },
      expect.objectContaining({
        name: 'Layer 2',
        members: [BO.id],
        weekdays: [1, 2, 3, 4, 5, 7],
        hours: { from: '08:00', to: '17:00' },
      }),
    ]);
    expect(
      layerWords({ ...rotaOf({}).layers[0]!, weekdays: [7, 1], hours: { from: '22:00', to: '06:00' } }),
    ).toBe('Week by week: Mon Sun 22:00–06:00, hand-over at 06:00');
  });
});

describe('a swap', () => {
  const swap = {
    id: 3,
    askedBy: { userId: BO.id, name: BO.name },
    askedOf: { userId: ADA.id, name: ADA.name },
    from: at(40),
    to: at(48),
    inReturn: { from: at(60), to: at(68) },
    reason: 'Choir',
  };

  test('is accepted by who was asked; a refusal stays beside it', async () => {
    show('technician', rotaOf({ swaps: [swap] }));
    service.current.on('POST /api/v1/rota/1/swaps/3/accept', () => refusal(409, 'The rota has changed'));
    expect(await screen.findByText(/In return Bo Lund for Ada Fenn/)).toBeInTheDocument();
    expect(screen.queryByRole('button', { name: 'Withdraw' })).toBeNull();
    await userEvent.click(screen.getByRole('button', { name: 'Accept' }));
    expect(await screen.findByRole('alert')).toHaveTextContent('The rota has changed');
  });

  test('is asked for one’s own shift ahead', async () => {
    const own = { from: at(31), to: at(55), userId: ADA.id, name: ADA.name, override: false, layer: 'L' };
    show('technician', rotaOf({ shifts: [own] }));
    service.current.on('POST /api/v1/rota/1/swaps', () => ({ status: 201, body: rotaOf({}) }));
    await choose(await screen.findByRole('combobox', { name: 'Your shift' }), /to/);
    await choose(screen.getByRole('combobox', { name: 'Who is to take it' }), BO.name);
    await userEvent.type(screen.getByLabelText('Why'), 'Choir');
    await userEvent.click(screen.getByRole('button', { name: 'Ask for the swap' }));
    expect(await screen.findByText(/rota changes when they accept/)).toBeInTheDocument();
    expect(service.current.bodies('POST /api/v1/rota/1/swaps')).toEqual([
      { askedOfId: BO.id, from: own.from, to: own.to, reason: 'Choir' },
    ]);
  });
});

describe('outside these pages', () => {
  test('a private address is shown once and taken back', async () => {
    show('viewer');
    service.current.on('POST /api/v1/rota/1/feeds', () => {
      service.current.list('/api/v1/rota/feeds', [
        { id: 8, siteId: 1, siteName: 'Tile Hall', own: true, createdAt: at(0), lastReadAt: null },
      ]);
      return { status: 201, body: { id: 8, url: 'http://polewright.test/api/v1/calendar/abc.ics' } };
    });
    service.current.on('DELETE /api/v1/rota/feeds/8', () => {
      service.current.list('/api/v1/rota/feeds', []);
      return { status: 204 };
    });
    await userEvent.click(await screen.findByRole('button', { name: 'Address of my shifts' }));
    expect(await screen.findByLabelText('The address, shown this once')).toHaveValue(
      'http://polewright.test/api/v1/calendar/abc.ics',
    );
    await userEvent.click(await screen.findByRole('button', { name: /^Take back/ }));
    await waitFor(() => expect(screen.queryByRole('button', { name: /^Take back/ })).toBeNull());
    expect(screen.queryByLabelText('The address, shown this once')).toBeNull();
    expect(screen.queryByRole('button', { name: /Take in a CSV/ })).toBeNull();
  });

  test('a file with bad lines is refused with every line named', async () => {
    show('administrator');
    service.current.on('POST /api/v1/rota/1/overrides.csv', () =>
      refusal(400, 'Nothing was stored.', [
        { path: 'line 2', message: 'email is missing' },
        { path: 'line 5', message: 'overlaps line 3' },
      ]),
    );
    await screen.findByRole('button', { name: /Take in a CSV/ });
    const input = document.querySelector<HTMLInputElement>('input[type=file]')!;
    await userEvent.upload(input, new File(['from,to,email'], 'rota.csv', { type: 'text/csv' }));
    const alert = await screen.findByRole('alert');
    expect(alert).toHaveTextContent('Nothing was stored.');
    expect(
      within(alert)
        .getAllByRole('listitem')
        .map(({ textContent }) => textContent),
    ).toEqual(['line 2: email is missing', 'line 5: overlaps line 3']);
  });
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
