import { Button, Select } from '@mantine/core';
import { notifications } from '@mantine/notifications';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import type { Schemas } from '../../api/client';
import type { Role } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { SiteTime } from '../../components/site-time';
import { changePerson, OWN_ZONE, ROLES, type Person } from './people-api';

type Site = Schemas['SiteDto'];

const NO_ROLE = 'no role';

/** A change of a person, before it is asked about. */
interface Change {
  question: string;
  consequence: string;
  label: string;
  body: Schemas['ChangePersonDto'];
  done: string;
}

/** A person with a role per site; every change asks once and names them. */
export function PersonRow({ person, sites }: { person: Person; sites: Site[] }) {
  const { user } = useSession();
  const [change, setChange] = useState<Change | null>(null);
  const roleOn = (siteId: number): string =>
    person.roles.find((entry) => entry.siteId === siteId)?.role ?? NO_ROLE;
  const others = (siteId: number): Schemas['GiveRoleDto'][] =>
    person.roles
      .filter((entry) => entry.siteId !== siteId)
      .map(({ siteId: id, role }) => ({ siteId: id, role }));
  const askRole = ({ id, name }: Site, role: string): void => {
    const before = roleOn(id);
    if (role === before) return;
    const gone = role === NO_ROLE;
    setChange({
      question: gone ? `Take ${person.name} off ${name}` : `Make ${person.name} ${role} on ${name}`,
      consequence: `${person.name} is ${before} on ${name} now. ${
        gone && person.roles.length === 1
          ? 'Without a role they are no longer listed here and see nothing; only a new invitation brings them back.'
          : 'It holds from their next step.'
      }`,
      label: gone ? 'Take the role away' : `Make ${role}`,
      body: { roles: gone ? others(id) : [...others(id), { siteId: id, role: role as Role }] },
      done: gone ? `${person.name} has no role on ${name} now.` : `${person.name} is ${role} on ${name} now.`,
    });
  };
  const askAccess = (): void =>
    setChange(
      person.disabled
        ? {
            question: `Let ${person.name} in again`,
            consequence: 'They can sign in with their password and have their roles back.',
            label: 'Let in again',
            body: { disabled: false },
            done: `${person.name} can sign in again.`,
          }
        : {
            question: `Shut ${person.name} out`,
            consequence:
              'They are signed out everywhere, cannot sign in, and are on call no more. Roles are kept.',
            label: 'Shut out',
            body: { disabled: true },
            done: `${person.name} is shut out.`,
          },
    );
  return (
    <tr>
      <td className="nowrap">
        {person.name}
        {person.disabled && <div className="small soft">shut out</div>}
        {person.invited && <div className="small soft">invited to a further site</div>}
      </td>
      <td>{person.email}</td>
      {sites.map((site) => (
        <td key={site.id}>
          <Select
            size="xs"
            w={140}
            aria-label={`Role of ${person.name} on ${site.name}`}
            allowDeselect={false}
            disabled={person.disabled}
            value={roleOn(site.id)}
            onChange={(role) => role && askRole(site, role)}
            data={[...ROLES, NO_ROLE]}
          />
        </td>
      ))}
      <td className="small soft">
        {person.lastSignInAt ? <SiteTime at={person.lastSignInAt} timeZone={OWN_ZONE} /> : 'never'}
      </td>
      <td>
        {person.id !== user?.id && (
          <Button
            size="compact-sm"
            variant="default"
            aria-label={`${person.disabled ? 'Let in again' : 'Shut out'}: ${person.name}`}
            onClick={askAccess}
          >
            {person.disabled ? 'Let in again …' : 'Shut out …'}
          </Button>
        )}
        {change && <ConfirmChange person={person} change={change} onClose={() => setChange(null)} />}
      </td>
    </tr>
  );
}

function ConfirmChange({
  person,
  change: { question, consequence, label, body, done },
  onClose,
}: {
  person: Person;
  change: Change;
  onClose: () => void;
}) {
  const put = useMutation({
    mutationFn: () => changePerson(person.id, body),
    onSuccess: () => {
      notifications.show({ message: done, closeButtonProps: { 'aria-label': 'Close' } });
      onClose();
    },
  });
  return (
    <ConfirmDialog
      opened
      title={question}
      confirmLabel={label}
      loading={put.isPending}
      problem={put.error?.message ?? null}
      onConfirm={() => put.mutate()}
      onClose={onClose}
    >
      {consequence}
    </ConfirmDialog>
  );
}
