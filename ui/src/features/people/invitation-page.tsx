import { Button, PasswordInput, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { useMutation, useQuery } from '@tanstack/react-query';
import { Link, useNavigate, useParams } from 'react-router-dom';
import { answer, client, Problem } from '../../api/client';
import { signedIn } from '../../api/session';
import { FrontDoor } from '../auth/front-door';
import classes from './people.module.css';

const LEAST_LENGTH = 10;
/** Not found, used or too old. */
const DEAD_LINK = [404, 410];

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
  const reset = view.data?.purpose === 'password-reset';
  const presentPassword = !reset && view.data?.existing === true;
  const named = reset || presentPassword || !!view.data?.name;
  const form = useForm({
    initialValues: { name: '', email: '', password: '' },
    validate: {
      name: (value) => (named || value.trim() ? null : 'Your name'),
      password: (value) => {
        if (presentPassword) return value ? null : 'Your present password';
        return value.length >= LEAST_LENGTH ? null : `At least ${LEAST_LENGTH} characters`;
      },
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
    return view.error instanceof Problem && DEAD_LINK.includes(view.error.status) ? (
      <FrontDoor title="This link does not work">
        <p role="alert">{view.error.message}</p>
        <p className="soft">Ask for a new one; a link works once and for a limited time.</p>
        <Link to="/sign-in">To the sign-in</Link>
      </FrontDoor>
    ) : (
      <FrontDoor title="The link could not be read">
        <p role="alert">
          {view.error instanceof Problem ? view.error.message : 'The service does not answer.'} Your link is
          kept as it is.
        </p>
        <Button onClick={() => void view.refetch()}>Try again</Button>
      </FrontDoor>
    );
  if (!view.data) return <FrontDoor title="One moment">{null}</FrontDoor>;
  const { name, email, siteRoles } = view.data;
  return (
    <FrontDoor title={reset ? 'A new password' : 'Welcome'}>
      {!reset && siteRoles.length > 0 && (
        <p style={{ marginTop: 0 }}>
          You are invited as {siteRoles.map(({ role, siteName }) => `${role} at ${siteName}`).join(', ')}.
        </p>
      )}
      <form onSubmit={form.onSubmit((values) => accept.mutate(values))} style={{ display: 'grid', gap: 12 }}>
        {email === null && <TextInput label="Mail address" type="email" {...form.getInputProps('email')} />}
        {!reset && !presentPassword && (
          <TextInput label="Name" placeholder={name} {...form.getInputProps('name')} />
        )}
        <PasswordInput
          label={presentPassword ? 'Your present password' : 'Choose a password'}
          description={presentPassword ? undefined : `at least ${LEAST_LENGTH} characters`}
          autoComplete={presentPassword ? 'current-password' : 'new-password'}
          visibilityToggleButtonProps={{ 'aria-label': 'Show or hide the password' }}
          {...form.getInputProps('password')}
        />
        {accept.error && (
          <p role="alert" className={classes.refusal}>
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
