import { ActionIcon, Button, Chip, Group, MultiSelect, NumberInput, Switch, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { notifications } from '@mantine/notifications';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import type { Schemas } from '../../api/client';
import { Card } from '../../components/card';
import { onSite } from '../../components/site-clock';
import { WEEKDAYS } from './layer-words';
import { Refusal } from './refusal';
import { choicesOf, setLayers, type Rota } from './rota-api';
import classes from './rota.module.css';

interface LayerValues {
  key: string;
  name: string;
  members: string[];
  handOverTime: string;
  rotationDays: number | string;
  startDate: string;
  endDate: string;
  weekdays: string[];
  someHours: boolean;
  from: string;
  to: string;
}

const EVERY_DAY = WEEKDAYS.map((_, i) => String(i + 1));

const valuesOf = ({ layers }: Rota): LayerValues[] =>
  layers.map(({ members, weekdays, hours, endDate, ...layer }, i) => ({
    ...layer,
    key: `stored ${i}`,
    members: members.map(({ userId }) => String(userId)),
    endDate: endDate ?? '',
    weekdays: weekdays.map(String),
    someHours: hours !== null,
    from: hours?.from ?? '08:00',
    to: hours?.to ?? '17:00',
  }));

const asLayer = (layer: LayerValues): Schemas['SetLayerDto'] => ({
  name: layer.name.trim(),
  members: layer.members.map(Number),
  handOverTime: layer.handOverTime,
  rotationDays: Number(layer.rotationDays),
  startDate: layer.startDate,
  endDate: layer.endDate || null,
  weekdays: layer.weekdays.map(Number),
  hours: layer.someHours ? { from: layer.from, to: layer.to } : null,
});

let added = 0;
const newLayer = (timeZone: string, name: string): LayerValues => ({
  key: `new ${++added}`,
  name,
  members: [],
  handOverTime: '06:00',
  rotationDays: 7,
  startDate: onSite(Date.now(), timeZone).format('YYYY-MM-DD'),
  endDate: '',
  weekdays: EVERY_DAY,
  someHours: false,
  from: '08:00',
  to: '17:00',
});

/** Who takes turns, when a layer holds, and when they hand over; a later layer counts over an earlier one. */
export function LayersForm({ rota }: { rota: Rota }) {
  const form = useForm<{ layers: LayerValues[] }>({
    initialValues: { layers: valuesOf(rota) },
    validate: {
      layers: {
        name: (value) => (value.trim() ? null : 'A name'),
        members: (value) => (value.length > 0 ? null : 'At least one person'),
        handOverTime: (value) => (value ? null : 'A time of day'),
        rotationDays: (value) => (Number(value) >= 1 ? null : 'From 1 to 60'),
        startDate: (value) => (value ? null : 'A day'),
        weekdays: (value) => (value.length > 0 ? null : 'At least one day'),
      },
    },
  });
  const { layers } = form.getValues();
  const stored = JSON.stringify(rota.layers);
  const [begunFrom, setBegunFrom] = useState(stored);
  const takeStored = (from: Rota): void => {
    setBegunFrom(JSON.stringify(from.layers));
    form.setInitialValues({ layers: valuesOf(from) });
    form.setValues({ layers: valuesOf(from) });
  };
  const save = useMutation({
    mutationFn: (values: LayerValues[]) => setLayers(rota.siteId, values.map(asLayer)),
    onSuccess: (saved) => {
      takeStored(saved);
      notifications.show({
        message: 'The layers are saved.',
        closeButtonProps: { 'aria-label': 'Close' },
      });
    },
  });
  return (
    <Card title="Layers" sub="a later layer counts over an earlier one in its own days and hours">
      <form className={classes.form} onSubmit={form.onSubmit((values) => save.mutate(values.layers))}>
        {layers.length === 0 && (
          <p className={classes.gap}>No layer: nobody is on call except by an override.</p>
        )}
        {layers.map((layer, i) => (
          <fieldset key={layer.key} className={classes.layer}>
            <legend>
              {i + 1}. {layer.name || 'Layer'}
            </legend>
            <div className={classes.fields}>
              <TextInput label="Name" maxLength={60} {...form.getInputProps(`layers.${i}.name`)} />
              <MultiSelect
                label="People, in the order of their turns"
                className={classes.wide}
                searchable
                data={choicesOf(rota)}
                {...form.getInputProps(`layers.${i}.members`)}
              />
              <TextInput label="Hand-over" type="time" {...form.getInputProps(`layers.${i}.handOverTime`)} />
              <NumberInput
                label="Days a turn"
                min={1}
                max={60}
                {...form.getInputProps(`layers.${i}.rotationDays`)}
              />
              <TextInput
                label="First turn starts"
                type="date"
                {...form.getInputProps(`layers.${i}.startDate`)}
              />
              <TextInput
                label="Ends on (if it does)"
                type="date"
                {...form.getInputProps(`layers.${i}.endDate`)}
              />
              <div className={classes.wide}>
                <span className={classes.label} id={`days-${layer.key}`}>
                  Days
                </span>
                <Chip.Group
                  multiple
                  value={layer.weekdays}
                  onChange={(days) => form.setFieldValue(`layers.${i}.weekdays`, days)}
                >
                  <Group gap={6} role="group" aria-labelledby={`days-${layer.key}`}>
                    {WEEKDAYS.map((day, k) => (
                      <Chip key={day} value={String(k + 1)} size="sm" variant="outline">
                        {day}
                      </Chip>
                    ))}
                  </Group>
                </Chip.Group>
                {form.errors[`layers.${i}.weekdays`] && (
                  <span style={{ color: 'var(--out)' }}>{form.errors[`layers.${i}.weekdays`]}</span>
                )}
              </div>
              <Switch
                label="Only some hours"
                style={{ alignSelf: 'end' }}
                {...form.getInputProps(`layers.${i}.someHours`, { type: 'checkbox' })}
              />
              {layer.someHours && (
                <>
                  <TextInput label="From" type="time" {...form.getInputProps(`layers.${i}.from`)} />
                  <TextInput
                    label={layer.to <= layer.from ? 'To, on the next day' : 'To'}
                    type="time"
                    {...form.getInputProps(`layers.${i}.to`)}
                  />
                </>
              )}
            </div>
            <Group gap={8} mt={10}>
              <ActionIcon
                variant="default"
                size="lg"
                disabled={i === 0}
                aria-label={`Move ${layer.name} earlier: it then counts less`}
                onClick={() => form.reorderListItem('layers', { from: i, to: i - 1 })}
              >
                ↑
              </ActionIcon>
              <ActionIcon
                variant="default"
                size="lg"
                disabled={i === layers.length - 1}
                aria-label={`Move ${layer.name} later: it then counts more`}
                onClick={() => form.reorderListItem('layers', { from: i, to: i + 1 })}
              >
                ↓
              </ActionIcon>
              <Button
                variant="default"
                size="compact-md"
                aria-label={`Take out ${layer.name}`}
                onClick={() => form.removeListItem('layers', i)}
              >
                Take out
              </Button>
            </Group>
          </fieldset>
        ))}
        {stored !== begunFrom && (
          <p role="status" className="small" style={{ margin: 0 }}>
            The layers were changed meanwhile; saving replaces them.{' '}
            <Button size="compact-sm" variant="default" onClick={() => takeStored(rota)}>
              Show them as they are now
            </Button>
          </p>
        )}
        {save.error && <Refusal error={save.error} />}
        <Group gap={10}>
          <Button type="submit" loading={save.isPending}>
            Save the layers
          </Button>
          <Button
            variant="default"
            disabled={layers.length >= 10}
            onClick={() =>
              form.insertListItem('layers', newLayer(rota.timeZone, `Layer ${layers.length + 1}`))
            }
          >
            Add a layer
          </Button>
        </Group>
      </form>
    </Card>
  );
}
