import { Button, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { useMutation } from '@tanstack/react-query';
import { Link } from 'react-router-dom';
import { answer, client } from '../../api/client';
import { FrontDoor } from './front-door';

export function Component() {
  const form = useForm({
    initialValues: { email: '' },
    validate: { email: (value) => (value.includes('@') ? null : 'Your mail address') },
  });
  const ask = useMutation({
    mutationFn: (body: { email: string }) => answer(client.POST('/api/v1/auth/password-reset', { body })),
  });
  return (
    <FrontDoor title="Reset your password">
      {ask.isSuccess ? (
        <p role="status">
          If {form.values.email} belongs to somebody here, a mail with a link is on its way.
        </p>
      ) : (
        <form onSubmit={form.onSubmit((values) => ask.mutate(values))}>
          <TextInput
            label="Mail address"
            type="email"
            autoComplete="username"
            {...form.getInputProps('email')}
          />
          {ask.error && (
            <p role="alert" style={{ color: 'var(--out)' }}>
              {ask.error.message}
            </p>
          )}
          <Button type="submit" fullWidth mt="lg" loading={ask.isPending}>
            Send a link
          </Button>
        </form>
      )}
      <p className="small" style={{ margin: '14px 0 0' }}>
        <Link to="/sign-in">Back to sign-in</Link>
      </p>
    </FrontDoor>
  );
}
