import { Button, MultiSelect, NumberInput, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { Card } from '../../components/card';
import { onSite } from '../../components/site-clock';
import { peopleQuery } from '../people/people-api';
import { onCallChoices } from './on-call-people';
import { Refusal } from './refusal';
import { setRotation, type Rota } from './rota-api';
import classes from './rota.module.css';

interface Values {
  members: string[];
  handOverTime: string;
  rotationDays: number | string;
  startDate: string;
}

const valuesOf = ({ layer, timeZone }: Rota): Values => ({
  members: layer?.members.map(({ userId }) => String(userId)) ?? [],
  handOverTime: layer?.handOverTime ?? '06:00',
  rotationDays: layer?.rotationDays ?? 7,
  startDate: layer?.startDate ?? onSite(Date.now(), timeZone).format('YYYY-MM-DD'),
});

/** Who takes turns, for how long, and when they hand over. */
export function RotationForm({ rota }: { rota: Rota }) {
  const people = useQuery(peopleQuery);
  const form = useForm<Values>({
    initialValues: valuesOf(rota),
    validate: {
      members: (value) => (value.length > 0 ? null : 'At least one person'),
      handOverTime: (value) => (value ? null : 'A time of day'),
      rotationDays: (value) => (Number(value) >= 1 ? null : 'From 1 to 60'),
      startDate: (value) => (value ? null : 'A day'),
    },
  });
  const stored = JSON.stringify(rota.layer);
  const [begunFrom, setBegunFrom] = useState(stored);
  const takeStored = (from: Rota): void => {
    setBegunFrom(JSON.stringify(from.layer));
    form.setInitialValues(valuesOf(from));
    form.setValues(valuesOf(from));
  };
  const save = useMutation({
    mutationFn: ({ members, handOverTime, rotationDays, startDate }: Values) =>
      setRotation(rota.siteId, {
        members: members.map(Number),
        handOverTime,
        rotationDays: Number(rotationDays),
        startDate,
      }),
    onSuccess: (saved) => {
      takeStored(saved);
      notifications.show({
        message: 'The rotation is saved.',
        closeButtonProps: { 'aria-label': 'Close' },
      });
    },
  });
  return (
    <Card title="Rotation" sub="in the order of their turns">
      <form className={classes.form} onSubmit={form.onSubmit((values) => save.mutate(values))}>
        <MultiSelect
          label="People"
          searchable
          data={onCallChoices(rota, people.data?.items ?? [])}
          {...form.getInputProps('members')}
        />
        <TextInput label="Hand-over" type="time" {...form.getInputProps('handOverTime')} />
        <NumberInput label="Days a turn" min={1} max={60} {...form.getInputProps('rotationDays')} />
        <TextInput label="First turn starts" type="date" {...form.getInputProps('startDate')} />
        {stored !== begunFrom && (
          <p role="status" className="small" style={{ margin: 0 }}>
            The rotation was changed meanwhile; saving replaces it.{' '}
            <Button size="compact-sm" variant="default" onClick={() => takeStored(rota)}>
              Show it as it is now
            </Button>
          </p>
        )}
        {people.error && <Refusal error={people.error} />}
        {save.error && <Refusal error={save.error} />}
        <Button type="submit" loading={save.isPending}>
          Save the rotation
        </Button>
      </form>
    </Card>
  );
}
