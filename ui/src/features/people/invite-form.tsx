import { Button, Select, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation } from '@tanstack/react-query';
import type { Schemas } from '../../api/client';
import type { Role } from '../../api/policy';
import { Card } from '../../components/card';
import { invite, ROLES } from './people-api';
import classes from './people.module.css';

const NO_ROLE = 'no role';

interface Values {
  name: string;
  email: string;
  /** By site id. */
  roles: Record<string, string>;
}

/** Invites a person by mail, with a role on each site. */
export function InviteForm({ sites }: { sites: Schemas['SiteDto'][] }) {
  const form = useForm<Values>({
    initialValues: {
      name: '',
      email: '',
      roles: Object.fromEntries(sites.map(({ id }) => [String(id), NO_ROLE])),
    },
    validate: {
      name: (value) => (value.trim() ? null : 'The person’s name'),
      email: (value) => (value.includes('@') ? null : 'A mail address'),
      roles: (value) =>
        Object.values(value).some((role) => role !== NO_ROLE) ? null : 'A role on at least one site',
    },
  });
  const send = useMutation({
    mutationFn: ({ name, email, roles }: Values) =>
      invite({
        name: name.trim(),
        email: email.trim(),
        roles: Object.entries(roles)
          .filter(([, role]) => role !== NO_ROLE)
          .map(([siteId, role]) => ({ siteId: Number(siteId), role: role as Role })),
      }),
    onSuccess: ({ email }) => {
      form.reset();
      notifications.show({
        message: `A link is on its way to ${email}.`,
        closeButtonProps: { 'aria-label': 'Close' },
      });
    },
  });
  return (
    <Card title="Invite somebody" sub="they get a link by mail and choose their own password">
      <form className={classes.form} onSubmit={form.onSubmit((values) => send.mutate(values))}>
        <TextInput label="Name" autoComplete="off" maxLength={200} {...form.getInputProps('name')} />
        <TextInput
          label="Mail address"
          type="email"
          autoComplete="off"
          maxLength={254}
          {...form.getInputProps('email')}
        />
        {sites.map(({ id, name }) => (
          <Select
            key={id}
            label={`Role on ${name}`}
            allowDeselect={false}
            data={[...ROLES, NO_ROLE]}
            {...form.getInputProps(`roles.${id}`)}
            onChange={(role) => {
              form.setFieldValue(`roles.${id}`, role ?? NO_ROLE);
              form.clearFieldError('roles');
            }}
          />
        ))}
        {form.errors.roles && (
          <p role="alert" className={classes.refusal}>
            {form.errors.roles}
          </p>
        )}
        {send.error && (
          <p role="alert" className={classes.refusal}>
            {send.error.message}
          </p>
        )}
        <Button type="submit" loading={send.isPending}>
          Send the invitation
        </Button>
      </form>
    </Card>
  );
}
