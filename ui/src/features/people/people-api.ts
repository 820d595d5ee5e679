import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import type { Role } from '../../api/policy';
import { queryClient } from '../../api/query-client';

export type Person = Schemas['PersonDto'];
export type Invitation = Schemas['InvitationDto'];

export const ROLES: readonly Role[] = ['viewer', 'technician', 'engineer', 'approver', 'administrator'];

/** The people of the sites that the reader administers. */
export const peopleQuery = queryOptions({
  queryKey: ['people', 'all'],
  queryFn: () => answer(client.GET('/api/v1/people')),
});

/** Invitations that nobody has accepted yet. */
export const openInvitationsQuery = queryOptions({
  queryKey: ['people', 'invitations'],
  queryFn: () => answer(client.GET('/api/v1/people/invitations')),
});

/** Who can be on call follows from people and their roles. */
async function changed<T>(request: Promise<T>): Promise<T> {
  try {
    return await request;
  } finally {
    await Promise.all(
      ['people', 'rota', 'on-call'].map((key) => queryClient.invalidateQueries({ queryKey: [key] })),
    );
  }
}

export const changePerson = (id: number, body: Schemas['ChangePersonDto']) =>
  changed(answer(client.PATCH('/api/v1/people/{id}', { params: { path: { id } }, body })));

export const invite = (body: Schemas['InviteDto']) =>
  changed(answer(client.POST('/api/v1/people/invitations', { body })));

export const revokeInvitation = (id: number) =>
  changed(answer(client.DELETE('/api/v1/people/invitations/{id}', { params: { path: { id } } })));

/** Sign-ins and invitations belong to no site; they are told on the reader's own clock. */
export const OWN_ZONE = Intl.DateTimeFormat().resolvedOptions().timeZone;
