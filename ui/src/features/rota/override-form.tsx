import { Button, Select, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation } from '@tanstack/react-query';
import dayjs from 'dayjs';
import { useState } from 'react';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { onSite } from '../../components/site-clock';
import { Refusal } from './refusal';
import { addOverride, choicesOf, type Rota } from './rota-api';
import classes from './rota.module.css';

/** As a `datetime-local` field reads and writes. */
const LOCAL = 'YYYY-MM-DDTHH:mm';

/** Somebody stands in for a while. Times are read on the site's clock, wherever the person sits. */
export function OverrideForm({ rota }: { rota: Rota }) {
  const { siteId, timeZone } = rota;
  const { user } = useSession();
  const choices = choicesOf(rota);
  const own = user && may(user, 'alert.acknowledge', siteId) ? String(user.id) : null;
  const [now] = useState(() => onSite(Date.now(), timeZone));
  const form = useForm({
    initialValues: {
      userId: own,
      from: now.format(LOCAL),
      to: now.add(8, 'hour').format(LOCAL),
      reason: '',
    },
    validate: {
      userId: (value) => (value ? null : 'Who?'),
      from: (value) => (value ? null : 'From when?'),
      to: (value, { from }) => (value > from ? null : 'It must end after it begins'),
      reason: (value) => (value.trim() ? null : 'Say why'),
    },
  });
  const add = useMutation({
    mutationFn: ({ userId, from, to, reason }: typeof form.values) =>
      addOverride(siteId, {
        userId: Number(userId),
        from: dayjs.tz(from, timeZone).toISOString(),
        to: dayjs.tz(to, timeZone).toISOString(),
        reason: reason.trim(),
      }),
    onSuccess: (_, { userId }) => {
      form.setFieldValue('reason', '');
      notifications.show({
        message: `${choices.find(({ value }) => value === userId)?.label ?? 'The person'} stands in.`,
        closeButtonProps: { 'aria-label': 'Close' },
      });
    },
  });
  return (
    <Card title="Override" sub={`somebody else takes over for a while; times of ${timeZone}`}>
      <form className={classes.form} onSubmit={form.onSubmit((values) => add.mutate(values))}>
        <Select label="Who" allowDeselect={false} data={choices} {...form.getInputProps('userId')} />
        <TextInput label="From" type="datetime-local" {...form.getInputProps('from')} />
        <TextInput label="To" type="datetime-local" {...form.getInputProps('to')} />
        <TextInput label="Reason" maxLength={500} {...form.getInputProps('reason')} />
        {add.error && <Refusal error={add.error} />}
        <Button type="submit" variant="outline" loading={add.isPending}>
          Add the override
        </Button>
      </form>
    </Card>
  );
}
