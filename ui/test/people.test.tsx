import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { describe, expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import { getAccessToken } from '../src/api/session';
import { Component as InvitationPage } from '../src/features/people/invitation-page';
import { Component as PeoplePage } from '../src/features/people/people-page';
import { ADA, refusal, serviceOfTests, showPage } from './show-page';

type Person = Schemas['PersonDto'];

const personOf = (id: number, name: string, role: Person['roles'][number]['role'] | null): Person => ({
  id,
  name,
  email: `${name.split(' ')[0]!.toLowerCase()}@tarnwick.example`,
  roles: role ? [{ siteId: 1, siteName: 'Tile Hall', role }] : [],
  disabled: false,
  lastSignInAt: null,
  invited: false,
});
const ADMINISTRATOR = personOf(ADA.id, ADA.name, 'administrator');
const BO = personOf(2, 'Bo Lund', 'technician');

const service = serviceOfTests();

function show(invitations: Schemas['InvitationDto'][] = []): void {
  service.current.list('/api/v1/people', [ADMINISTRATOR, BO]);
  service.current.list('/api/v1/people/invitations', invitations);
  showPage(PeoplePage, '/admin/people', 'administrator');
}

describe('people', () => {
  test('are for administrators: nobody else asks the service for them', async () => {
    showPage(PeoplePage, '/admin/people', 'engineer');
    expect(await screen.findByText('Only administrators manage people')).toBeInTheDocument();
    expect(service.current.asked).toEqual([]);
  });

  test('shutting out asks once, names the person, and keeps the question when refused', async () => {
    show();
    const path = 'PATCH /api/v1/people/2';
    service.current.on(path, () => refusal(403, 'Bo Lund also works on other sites'));
    await userEvent.click(await screen.findByRole('button', { name: 'Shut out: Bo Lund' }));
    const dialog = await screen.findByRole('dialog', { name: 'Shut Bo Lund out' });
    expect(service.current.bodies(path)).toEqual([]);
    await userEvent.click(within(dialog).getByRole('button', { name: 'Shut out' }));
    expect(await within(dialog).findByRole('alert')).toHaveTextContent('also works on other sites');
    expect(service.current.bodies(path)).toEqual([{ disabled: true }]);
    await userEvent.click(within(dialog).getByRole('button', { name: 'Cancel' }));
    await waitFor(() => expect(screen.queryByRole('dialog')).toBeNull());
    expect(screen.getByRole('button', { name: 'Shut out: Bo Lund' })).toBeInTheDocument();
  });

  test('nobody can shut themselves out', async () => {
    show();
    await screen.findByRole('button', { name: 'Shut out: Bo Lund' });
    expect(screen.queryByRole('button', { name: `Shut out: ${ADA.name}` })).toBeNull();
  });

  test('a role changes only after the question', async () => {
    show();
    const path = 'PATCH /api/v1/people/2';
    service.current.on(path, () => {
      const engineer = personOf(2, 'Bo Lund', 'engineer');
      service.current.list('/api/v1/people', [ADMINISTRATOR, engineer]);
      return { status: 200, body: engineer };
    });
    await userEvent.click(await screen.findByRole('combobox', { name: 'Role of Bo Lund on Tile Hall' }));
    await userEvent.click(await screen.findByRole('option', { name: 'engineer' }));
    const dialog = await screen.findByRole('dialog', { name: 'Make Bo Lund engineer on Tile Hall' });
    expect(service.current.bodies(path)).toEqual([]);
    await userEvent.click(within(dialog).getByRole('button', { name: 'Make engineer' }));
    expect(await screen.findByText('Bo Lund is engineer on Tile Hall now.')).toBeInTheDocument();
    expect(service.current.bodies(path)).toEqual([{ roles: [{ siteId: 1, role: 'engineer' }] }]);
    expect(screen.getByRole('combobox', { name: 'Role of Bo Lund on Tile Hall' })).toHaveValue('engineer');
  });

  test('an invitation needs a role, goes out once, and a refusal keeps what was typed', async () => {
    show();
    const path = 'POST /api/v1/people/invitations';
    service.current.on(path, () => refusal(409, 'Cy Marsh has a role on this site already'));
    await userEvent.type(await screen.findByLabelText('Name'), 'Cy Marsh');
    await userEvent.type(screen.getByLabelText('Mail address'), 'cy@tarnwick.example');
    await userEvent.click(screen.getByRole('button', { name: 'Send the invitation' }));
    expect(await screen.findByText('A role on at least one site')).toBeInTheDocument();
    expect(service.current.bodies(path)).toEqual([]);
    await userEvent.click(screen.getByRole('combobox', { name: 'Role on Tile Hall' }));
    await userEvent.click(await screen.findByRole('option', { name: 'viewer' }));
    await userEvent.click(screen.getByRole('button', { name: 'Send the invitation' }));
    expect(await screen.findByText('Cy Marsh has a role on this site already')).toBeInTheDocument();
    expect(screen.getByLabelText('Name')).toHaveValue('Cy Marsh');
    expect(service.current.bodies(path)).toEqual([
      { name: 'Cy Marsh', email: 'cy@tarnwick.example', roles: [{ siteId: 1, role: 'viewer' }] },
    ]);
  });

  test('an open invitation says for what, and is revoked after the question', async () => {
    show([
      {
        id: 5,
        email: 'cy@tarnwick.example',
        name: 'Cy Marsh',
        roles: [{ siteId: 1, role: 'viewer' }],
        expiresAt: new Date(Date.now() + 86_400_000).toISOString(),
      },
    ]);
    expect(await screen.findByText(/viewer on Tile Hall/)).toBeInTheDocument();
    service.current.on('DELETE /api/v1/people/invitations/5', () => {
      service.current.list('/api/v1/people/invitations', []);
      return { status: 204 };
    });
    await userEvent.click(screen.getByRole('button', { name: 'Revoke the invitation of Cy Marsh' }));
    await userEvent.click(await screen.findByRole('button', { name: 'Revoke it' }));
    await waitFor(() => expect(screen.queryByText(/viewer on Tile Hall/)).toBeNull());
  });
});

describe('the link of an invitation', () => {
  const view = (differs: Partial<Schemas['InvitationViewDto']>): void =>
    service.current.on('GET /api/v1/invitations/abc', () => ({
      status: 200,
      body: {
        purpose: 'invitation',
        name: 'Cy Marsh',
        email: 'cy@tarnwick.example',
        existing: false,
        siteRoles: [{ siteName: 'Tile Hall', role: 'viewer' }],
        ...differs,
      },
    }));
  const open = (): void => showPage(InvitationPage, '/invitation/abc', null, '/invitation/:token');
  const path = 'POST /api/v1/invitations/abc/accept';

  test('a long enough password makes the account and signs in', async () => {
    view({});
    service.current.on(path, () => ({
      status: 200,
      body: { accessToken: 'fresh', user: { ...ADA, owner: false, roles: [] } },
    }));
    open();
    expect(await screen.findByText('You are invited as viewer at Tile Hall.')).toBeInTheDocument();
    const password = screen.getByLabelText('Choose a password');
    await userEvent.type(password, 'short');
    await userEvent.click(screen.getByRole('button', { name: 'Come in' }));
    expect(await screen.findByText('At least 10 characters')).toBeInTheDocument();
    expect(service.current.bodies(path)).toEqual([]);
    await userEvent.type(password, ' but longer');
    await userEvent.click(screen.getByRole('button', { name: 'Come in' }));
    expect(await screen.findByText('elsewhere')).toBeInTheDocument();
    expect(getAccessToken()).toBe('fresh');
    expect(service.current.bodies(path)).toEqual([{ password: 'short but longer', name: 'Cy Marsh' }]);
  });

  test('whoever has an account gives the password that they have', async () => {
    view({ existing: true });
    open();
    expect(await screen.findByLabelText('Your present password')).toBeInTheDocument();
    expect(screen.queryByLabelText('Name')).toBeNull();
  });

  test('a link that is used up says so; one that could not be read is not called dead', async () => {
    service.current.on('GET /api/v1/invitations/abc', () => refusal(429, 'Too many requests'));
    open();
    expect(await screen.findByRole('heading', { name: 'The link could not be read' })).toBeInTheDocument();
    service.current.on('GET /api/v1/invitations/abc', () => refusal(404, 'This link was used already'));
    await userEvent.click(screen.getByRole('button', { name: 'Try again' }));
    expect(await screen.findByRole('heading', { name: 'This link does not work' })).toBeInTheDocument();
    expect(screen.getByRole('alert')).toHaveTextContent('This link was used already');
  });
});
