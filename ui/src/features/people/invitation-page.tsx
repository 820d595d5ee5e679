import { Button, PasswordInput, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useNavigate, useParams } from 'react-router-dom';
import { answer, client } from '../../api/client';
import { signedIn } from '../../api/session';
import { FrontDoor } from '../auth/front-door';

const LEAST_LENGTH = 10;

/** Where the link of an invitation or a password reset leads. */
export function Component() {
  const token = useParams().token ?? '';
  const navigate = useNavigate();
  const view = useQuery({
    queryKey: ['invitation', token],
    queryFn: () => answer(client.GET('/api/v1/invitations/{token}', { params: { path: { token } } })),
    retry: false,
    staleTime: Infinity,
  });
  const form = useForm({
    initialValues: { name: '', email: '', password: '' },
    validate: {
      password: (value) => (value.length >= LEAST_LENGTH ? null : `At least ${LEAST_LENGTH} characters`),
      email: (value) => (view.data?.email !== null || value.includes('@') ? null : 'Your mail address'),
    },
  });
  const accept = useMutation({
    mutationFn: ({ name, email, password }: typeof form.values) =>
      answer(
        client.POST('/api/v1/invitations/{token}/accept', {
          params: { path: { token } },
          body: {
            password,
            ...((name.trim() || view.data?.name) && { name: name.trim() || view.data!.name }),
            ...(view.data?.email === null && { email: email.trim() }),
          },
        }),
      ),
    onSuccess: (session) => {
      signedIn(session);
      void navigate('/', { replace: true });
    },
  });
  if (view.error)
    return (
      <FrontDoor title="This link does not work">
        <p role="alert">{view.error.message}</p>
        <p className="soft">Ask for a new one; a link works once and for a limited time.</p>
      </FrontDoor>
    );
  if (!view.data) return <FrontDoor title="One moment">{null}</FrontDoor>;
  const { purpose, name, email, existing, siteRoles } = view.data;
  const reset = purpose === 'password-reset';
  return (
    <FrontDoor title={reset ? 'A new password' : 'Welcome'}>
      {!reset && siteRoles.length > 0 && (
        <p style={{ marginTop: 0 }}>
          You are invited as {siteRoles.map(({ role, siteName }) => `${role} at ${siteName}`).join(', ')}.
        </p>
      )}
      <form onSubmit={form.onSubmit((values) => accept.mutate(values))} style={{ display: 'grid', gap: 12 }}>
        {email === null && <TextInput label="Mail address" type="email" {...form.getInputProps('email')} />}
        {!reset && !existing && <TextInput label="Name" placeholder={name} {...form.getInputProps('name')} />}
        <PasswordInput
          label={existing && !reset ? 'Your present password' : 'Choose a password'}
          description={existing && !reset ? undefined : `at least ${LEAST_LENGTH} characters`}
          autoComplete={existing && !reset ? 'current-password' : 'new-password'}
          visibilityToggleButtonProps={{ 'aria-label': 'Show or hide the password' }}
          {...form.getInputProps('password')}
        />
        {accept.error && (
          <p role="alert" style={{ color: 'var(--out)', margin: 0 }}>
            {accept.error.message}
          </p>
        )}
        <Button type="submit" loading={accept.isPending}>
          {reset ? 'Set the password' : 'Come in'}
        </Button>
      </form>
    </FrontDoor>
  );
}
