import { Button, Checkbox, Group, Select, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation } from '@tanstack/react-query';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { onSite } from '../../components/site-clock';
import { Refusal } from './refusal';
import { answerSwap, askSwap, choicesOf, type Rota, type SwapAnswer } from './rota-api';
import classes from './rota.module.css';

type Swap = Rota['swaps'][number];

/** Turns that two people exchange: what waits for an answer, and the way to ask for one. */
export function Swaps({ rota }: { rota: Rota }) {
  const { user } = useSession();
  return (
    <Card title="Swaps" sub="one asks, the other accepts; until then nothing changes">
      {rota.swaps.length === 0 && <p className="soft">None waits for an answer.</p>}
      {rota.swaps.map((swap) => (
        <Waiting key={swap.id} swap={swap} rota={rota} />
      ))}
      {may(user, 'alert.acknowledge', rota.siteId) && <AskForm rota={rota} />}
    </Card>
  );
}

function Waiting({ swap, rota }: { swap: Swap; rota: Rota }) {
  const { user } = useSession();
  const answering = useMutation({ mutationFn: (how: SwapAnswer) => answerSwap(rota.siteId, swap.id, how) });
  const day = (at: string): string => onSite(at, rota.timeZone).format('ddd D MMM HH:mm');
  const asked = swap.askedOf.userId === user?.id;
  const withdraws = swap.askedBy.userId === user?.id || may(user, 'rota.change', rota.siteId);
  const button = (how: SwapAnswer, label: string, variant: 'filled' | 'default') => (
    <Button
      size="compact-md"
      variant={variant}
      loading={answering.isPending && answering.variables === how}
      onClick={() => answering.mutate(how)}
    >
      {label}
    </Button>
  );
  return (
    <div className={classes.note}>
      <div>
        <b>{swap.askedOf.name}</b> for {swap.askedBy.name}: {day(swap.from)} to {day(swap.to)}.
      </div>
      {swap.inReturn && (
        <div>
          In return {swap.askedBy.name} for {swap.askedOf.name}: {day(swap.inReturn.from)} to{' '}
          {day(swap.inReturn.to)}.
        </div>
      )}
      <div className={`soft small ${classes.text}`}>{swap.reason}</div>
      {answering.error && <Refusal error={answering.error} />}
      <Group gap={8} mt={6}>
        {asked && button('accept', 'Accept', 'filled')}
        {asked && button('decline', 'Decline', 'default')}
        {withdraws && button('withdraw', 'Withdraw', 'default')}
      </Group>
    </div>
  );
}

function AskForm({ rota }: { rota: Rota }) {
  const { user } = useSession();
  const { timeZone } = rota;
  const local = (at: string): string => onSite(at, timeZone).format('YYYY-MM-DDTHH:mm');
  const shiftsOf = (mine: (userId: number) => boolean) =>
    rota.shifts
      .filter(({ from, userId }) => Date.parse(from) > Date.now() && mine(userId))
      .map(({ from, to, name }) => ({
        value: `${from}/${to}`,
        label: `${local(from).replace('T', ' ')} to ${local(to).replace('T', ' ')}${mine(user!.id) ? '' : `, ${name}`}`,
      }));
  const form = useForm({
    initialValues: {
      give: null as string | null,
      askedOf: null as string | null,
      back: false,
      take: null as string | null,
      reason: '',
    },
    validate: {
      give: (value) => (value ? null : 'Which of your shifts?'),
      askedOf: (value) => (value ? null : 'Who?'),
      take: (value, { back }) => (!back || value ? null : 'Which of theirs?'),
      reason: (value) => (value.trim() ? null : 'Say why'),
    },
  });
  const values = form.getValues();
  const ask = useMutation({
    mutationFn: () => {
      const [from, to] = values.give!.split('/') as [string, string];
      const [returnFrom, returnTo] = values.back && values.take ? values.take.split('/') : [];
      return askSwap(rota.siteId, {
        askedOfId: Number(values.askedOf),
        from,
        to,
        ...(returnFrom && returnTo && { returnFrom, returnTo }),
        reason: values.reason.trim(),
      });
    },
    onSuccess: () => {
      form.reset();
      notifications.show({
        message: 'They are told by mail; the rota changes when they accept.',
        closeButtonProps: { 'aria-label': 'Close' },
      });
    },
  });
  const own = shiftsOf((id) => id === user?.id);
  if (own.length === 0)
    return <p className="soft small">You have no shift in the next two weeks that you could give away.</p>;
  return (
    <form className={classes.form} style={{ marginTop: 12 }} onSubmit={form.onSubmit(() => ask.mutate())}>
      <Select label="Your shift" data={own} {...form.getInputProps('give')} />
      <Select
        label="Who is to take it"
        data={choicesOf(rota).filter(({ value }) => value !== String(user?.id))}
        {...form.getInputProps('askedOf')}
      />
      <Checkbox
        label="I take one of theirs in return"
        {...form.getInputProps('back', { type: 'checkbox' })}
      />
      {values.back && (
        <Select
          label="Their shift"
          data={shiftsOf((id) => String(id) === values.askedOf)}
          nothingFoundMessage="None in the next two weeks"
          {...form.getInputProps('take')}
        />
      )}
      <TextInput label="Why" maxLength={500} {...form.getInputProps('reason')} />
      {ask.error && <Refusal error={ask.error} />}
      <Button type="submit" variant="outline" loading={ask.isPending}>
        Ask for the swap
      </Button>
    </form>
  );
}
