import { Button, PasswordInput, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { useMutation, useQuery } from '@tanstack/react-query';
import { Link, Navigate, useLocation } from 'react-router-dom';
import { answer, client } from '../../api/client';
import { signedIn } from '../../api/session';
import { useSession } from '../../api/use-session';
import { FrontDoor } from './front-door';

const DEMO_SIGN_INS = ['viewer', 'technician', 'engineer', 'approver', 'admin'];

export function Component() {
  const { status } = useSession();
  const location = useLocation();
  const form = useForm({
    initialValues: { email: '', password: '' },
    validate: {
      email: (value) => (value.includes('@') ? null : 'Your mail address, such as name@site.example'),
      password: (value) => (value ? null : 'Your password'),
    },
  });
  const service = useQuery({
    queryKey: ['status'],
    queryFn: () => answer(client.GET('/api/v1/status')),
    staleTime: Infinity,
  });
  const signIn = useMutation({
    mutationFn: (body: { email: string; password: string }) =>
      answer(client.POST('/api/v1/auth/sign-in', { body })),
    onSuccess: signedIn,
  });
  if (status === 'signed-in')
    return <Navigate to={(location.state as { from?: string } | null)?.from ?? '/'} replace />;
  return (
    <FrontDoor title="Sign in">
      <form onSubmit={form.onSubmit((values) => signIn.mutate(values))}>
        <TextInput
          label="Mail address"
          type="email"
          autoComplete="username"
          autoFocus
          {...form.getInputProps('email')}
        />
        <PasswordInput
          label="Password"
          mt="md"
          autoComplete="current-password"
          visibilityToggleButtonProps={{ 'aria-label': 'Show or hide the password' }}
          {...form.getInputProps('password')}
        />
        {signIn.error && (
          <p role="alert" style={{ color: 'var(--out)', fontWeight: 560, margin: '12px 0 0' }}>
            {signIn.error.message}
          </p>
        )}
        <Button type="submit" fullWidth mt="lg" size="md" loading={signIn.isPending}>
          Sign in
        </Button>
      </form>
      <p className="small" style={{ margin: '14px 0 0' }}>
        <Link to="/password-reset">Forgotten the password?</Link>
      </p>
      {service.data?.demo && (
        <div
          className="small soft"
          style={{ marginTop: 18, borderTop: '1px solid var(--rule)', paddingTop: 12 }}
        >
          This is the demo. Password <b>polewright-demo</b> for
          <div style={{ display: 'flex', flexWrap: 'wrap', gap: 6, marginTop: 8 }}>
            {DEMO_SIGN_INS.map((name) => (
              <Button
                key={name}
                size="compact-sm"
                variant="default"
                onClick={() =>
                  form.setValues({ email: `${name}@tarnwick.example`, password: 'polewright-demo' })
                }
              >
                {name}
              </Button>
            ))}
          </div>
        </div>
      )}
    </FrontDoor>
  );
}
