import { Button, Checkbox, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation, useQuery } from '@tanstack/react-query';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import {
  choicesQuery,
  pushPossible,
  setChoices,
  switchPushOff,
  switchPushOn,
  type Choices,
} from './choices-api';

/** By which ways the signed-in person is told. */
export function ChoicesCard() {
  const { data, error, isPending, refetch } = useQuery(choicesQuery);
  if (error && !data) return <ErrorState error={error} what="Your choices" onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[220]} />;
  return (
    <Card title="How you are told" sub="alerts come by mail while you are on call; these come beside it">
      <Browsers choices={data} />
      <ChoicesForm choices={data} />
    </Card>
  );
}

function Browsers({ choices }: { choices: Choices }) {
  const on = useMutation({ mutationFn: () => switchPushOn(choices.pushKey) });
  const off = useMutation({ mutationFn: switchPushOff });
  const problem = on.error ?? off.error;
  return (
    <div style={{ marginBottom: 18 }}>
      <p style={{ margin: '0 0 8px' }}>
        Push messages show an alert on this device while the pages are closed.
      </p>
      {choices.subscriptions.map((browser) => (
        <div key={browser.id} style={{ display: 'flex', gap: 10, alignItems: 'center', margin: '0 0 8px' }}>
          <span style={{ flex: 1 }}>{browser.browser}</span>
          <Button
            size="compact-md"
            variant="default"
            aria-label={`Switch push messages off for ${browser.browser}, number ${browser.id}`}
            loading={off.isPending && off.variables?.id === browser.id}
            onClick={() => off.mutate(browser)}
          >
            Switch off
          </Button>
        </div>
      ))}
      {pushPossible() ? (
        <Button variant="outline" loading={on.isPending} onClick={() => on.mutate()}>
          Switch on for this browser
        </Button>
      ) : (
        <p className="soft small">This browser cannot show push messages from this address.</p>
      )}
      {problem && (
        <p role="alert" style={{ color: 'var(--out)' }}>
          {problem.message}
        </p>
      )}
    </div>
  );
}

function ChoicesForm({ choices }: { choices: Choices }) {
  const { user } = useSession();
  const form = useForm({
    initialValues: {
      dailyDigest: choices.dailyDigest,
      smsAlerts: choices.smsAlerts,
      phone: choices.phone ?? '',
    },
    validate: {
      phone: (value, { smsAlerts }) =>
        (smsAlerts || value) && !/^\+[1-9]\d{6,14}$/.test(value.replaceAll(' ', ''))
          ? 'A number such as +44 1632 960123'
          : null,
    },
  });
  const save = useMutation({
    mutationFn: ({ phone, ...rest }: typeof form.values) =>
      setChoices({ ...rest, phone: phone.replaceAll(' ', '') || null }),
    onSuccess: () =>
      notifications.show({
        message: 'Your choices are saved.',
        closeButtonProps: { 'aria-label': 'Close' },
      }),
  });
  const engineer = may(user, 'proposal.work');
  if (!engineer && !choices.smsOffered) return null;
  return (
    <form style={{ display: 'grid', gap: 12 }} onSubmit={form.onSubmit((values) => save.mutate(values))}>
      {engineer && (
        <Checkbox
          label="One mail each morning at seven about the axes of my sites"
          {...form.getInputProps('dailyDigest', { type: 'checkbox' })}
        />
      )}
      {choices.smsOffered && (
        <>
          <Checkbox label="Alerts also by SMS" {...form.getInputProps('smsAlerts', { type: 'checkbox' })} />
          <TextInput label="Phone number" type="tel" {...form.getInputProps('phone')} />
        </>
      )}
      {save.error && (
        <p role="alert" style={{ color: 'var(--out)', margin: 0 }}>
          {save.error.message}
        </p>
      )}
      <Button type="submit" loading={save.isPending} style={{ justifySelf: 'start' }}>
        Save my choices
      </Button>
    </form>
  );
}
