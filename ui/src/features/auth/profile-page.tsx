import { Button, PasswordInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation, useQuery } from '@tanstack/react-query';
import { sitesQuery } from '../../api/sites';
import { answer, client } from '../../api/client';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { ChoicesCard } from '../notifications/choices-card';

const LEAST_LENGTH = 10;

export function Component() {
  const { user } = useSession();
  const { data: sites } = useQuery(sitesQuery);
  const form = useForm({
    initialValues: { current: '', next: '' },
    validate: {
      next: (value) => (value.length >= LEAST_LENGTH ? null : `At least ${LEAST_LENGTH} characters`),
    },
  });
  const change = useMutation({
    mutationFn: (body: { current: string; next: string }) =>
      answer(client.PUT('/api/v1/auth/password', { body })),
    onSuccess: () => {
      form.reset();
      notifications.show({
        message: 'Your password is changed.',
        closeButtonProps: { 'aria-label': 'Close' },
      });
    },
  });
  if (!user) return null;
  return (
    <div style={{ display: 'grid', gap: 20, maxWidth: 560 }}>
      <title>Profile · Polewright</title>
      <h1>{user.name}</h1>
      <Card title="What you are here" sub={user.email}>
        {user.roles.map(({ siteId, role }) => (
          <div key={siteId}>
            {sites?.items.find(({ id }) => id === siteId)?.name ?? `Site ${siteId}`}: {role}
          </div>
        ))}
      </Card>
      <ChoicesCard />
      <Card title="Change your password">
        <form onSubmit={form.onSubmit((values) => change.mutate(values))}>
          <PasswordInput
            label="Present password"
            autoComplete="current-password"
            {...form.getInputProps('current')}
          />
          <PasswordInput
            label="New password"
            mt="sm"
            autoComplete="new-password"
            {...form.getInputProps('next')}
          />
          {change.error && (
            <p role="alert" style={{ color: 'var(--out)' }}>
              {change.error.message}
            </p>
          )}
          <Button type="submit" mt="md" loading={change.isPending}>
            Change it
          </Button>
        </form>
      </Card>
    </div>
  );
}
