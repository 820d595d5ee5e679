import { Button, Select, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation, useQuery } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { may, type Role } from '../../api/policy';
import { queryClient } from '../../api/query-client';
import { sitesQuery } from '../../api/sites';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';

const ROLES: Role[] = ['viewer', 'technician', 'engineer', 'approver', 'administrator'];
const NO_ROLE = 'no role';
const ZONE = Intl.DateTimeFormat().resolvedOptions().timeZone;

const people = { queryKey: ['people'], queryFn: () => answer(client.GET('/api/v1/people')) };
const invitations = {
  queryKey: ['people', 'invitations'],
  queryFn: () => answer(client.GET('/api/v1/people/invitations')),
};
const refresh = (): Promise<void> => queryClient.invalidateQueries({ queryKey: ['people'] });

export function Component() {
  const { user } = useSession();
  const { data, error, isPending, refetch } = useQuery(people);
  const open = useQuery(invitations);
  const { data: sites } = useQuery(sitesQuery);
  const own = sites?.items.filter(({ id }) => may(user, 'people.manage', id)) ?? [];
  if (!may(user, 'people.manage'))
    return (
      <EmptyState title="Only administrators manage people">Ask an administrator of your site.</EmptyState>
    );
  if (error && !data) return <ErrorState error={error} what="The people" onRetry={() => void refetch()} />;
  return (
    <>
      <title>People · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>People</h1>
      {isPending ? (
        <Waiting heights={[320]} />
      ) : (
        <div
          style={{
            display: 'grid',
            gridTemplateColumns: 'repeat(auto-fit, minmax(min(340px, 100%), 1fr))',
            gap: 18,
            alignItems: 'start',
          }}
        >
          <div style={{ gridColumn: 'span 2', minWidth: 0 }}>
            <Card title={`${data.items.length} people`} sub="one role per person and site">
              <div className="scroll-x">
                <table className="plain-table left">
                  <thead>
                    <tr>
                      <th>Name</th>
                      <th>Mail address</th>
                      {own.map(({ id, name }) => (
                        <th key={id}>{name}</th>
                      ))}
                      <th>Last sign-in</th>
                      <th />
                    </tr>
                  </thead>
                  <tbody>
                    {data.items.map((person) => (
                      <Person key={person.id} person={person} sites={own} />
                    ))}
                  </tbody>
                </table>
              </div>
            </Card>
          </div>
          <div style={{ display: 'grid', gap: 18 }}>
            <Invite sites={own} />
            {open.data && open.data.items.length > 0 && (
              <Card title="Open invitations">
                {open.data.items.map((invitation) => (
                  <OpenInvitation key={invitation.id} invitation={invitation} />
                ))}
              </Card>
            )}
          </div>
        </div>
      )}
    </>
  );
}

type Site = Schemas['SiteDto'];

function Person({ person, sites }: { person: Schemas['PersonDto']; sites: Site[] }) {
  const change = useMutation({
    mutationFn: (body: Schemas['ChangePersonDto']) =>
      answer(client.PATCH('/api/v1/people/{id}', { params: { path: { id: person.id } }, body })),
    onSuccess: refresh,
  });
  const setRole = (siteId: number, role: string | null): void => {
    const others = person.roles
      .filter((entry) => entry.siteId !== siteId)
      .map((entry) => ({ siteId: entry.siteId, role: entry.role }));
    change.mutate({
      roles: role === null || role === NO_ROLE ? others : [...others, { siteId, role: role as Role }],
    });
  };
  return (
    <tr style={{ opacity: person.disabled ? 0.6 : 1 }}>
      <td className="nowrap">{person.name}</td>
      <td>{person.email}</td>
      {sites.map(({ id, name }) => (
        <td key={id}>
          <Select
            size="xs"
            w={140}
            aria-label={`Role of ${person.name} on ${name}`}
            allowDeselect={false}
            value={person.roles.find(({ siteId }) => siteId === id)?.role ?? NO_ROLE}
            onChange={(role) => setRole(id, role)}
            data={[...ROLES, NO_ROLE]}
          />
        </td>
      ))}
      <td className="small soft">
        {person.lastSignInAt ? <SiteTime at={person.lastSignInAt} timeZone={ZONE} /> : 'never'}
      </td>
      <td>
        <Button
          size="compact-sm"
          variant="default"
          loading={change.isPending}
          onClick={() => change.mutate({ disabled: !person.disabled })}
        >
          {person.disabled ? 'Let in again' : 'Shut out'}
        </Button>
        {change.error && (
          <div role="alert" className="small" style={{ color: 'var(--out)' }}>
            {change.error.message}
          </div>
        )}
      </td>
    </tr>
  );
}

function Invite({ sites }: { sites: Site[] }) {
  const form = useForm({
    initialValues: { name: '', email: '', role: 'technician' as Role, site: 'all' },
    validate: {
      name: (value) => (value.trim() ? null : 'The person’s name'),
      email: (value) => (value.includes('@') ? null : 'A mail address'),
    },
  });
  const invite = useMutation({
    mutationFn: ({ name, email, role, site }: typeof form.values) =>
      answer(
        client.POST('/api/v1/people/invitations', {
          body: {
            name: name.trim(),
            email: email.trim(),
            roles: sites
              .filter(({ id }) => site === 'all' || site === String(id))
              .map(({ id }) => ({ siteId: id, role })),
          },
        }),
      ),
    onSuccess: ({ email }) => {
      form.reset();
      notifications.show({
        message: `A link is on its way to ${email}.`,
        closeButtonProps: { 'aria-label': 'Close' },
      });
      return refresh();
    },
  });
  return (
    <Card title="Invite somebody" sub="they get a link by mail and choose their own password">
      <form onSubmit={form.onSubmit((values) => invite.mutate(values))} style={{ display: 'grid', gap: 10 }}>
        <TextInput label="Name" {...form.getInputProps('name')} />
        <TextInput label="Mail address" type="email" {...form.getInputProps('email')} />
        <Select label="Role" data={ROLES} allowDeselect={false} {...form.getInputProps('role')} />
        <Select
          label="On"
          allowDeselect={false}
          data={[
            { value: 'all', label: 'every site of mine' },
            ...sites.map(({ id, name }) => ({ value: String(id), label: name })),
          ]}
          {...form.getInputProps('site')}
        />
        {invite.error && (
          <p role="alert" style={{ color: 'var(--out)', margin: 0 }}>
            {invite.error.message}
          </p>
        )}
        <Button type="submit" loading={invite.isPending} style={{ justifySelf: 'start' }}>
          Send the invitation
        </Button>
      </form>
    </Card>
  );
}

function OpenInvitation({
  invitation: { id, name, email, expiresAt },
}: {
  invitation: Schemas['InvitationDto'];
}) {
  const revoke = useMutation({
    mutationFn: () => answer(client.DELETE('/api/v1/people/invitations/{id}', { params: { path: { id } } })),
    onSuccess: refresh,
  });
  return (
    <div style={{ display: 'flex', gap: 10, alignItems: 'center', padding: '6px 0' }}>
      <div style={{ flex: 1, minWidth: 0 }}>
        {name}, {email}
        <div className="small soft">
          until <SiteTime at={expiresAt} timeZone={ZONE} />
        </div>
      </div>
      <Button size="compact-sm" variant="default" loading={revoke.isPending} onClick={() => revoke.mutate()}>
        Revoke
      </Button>
    </div>
  );
}
