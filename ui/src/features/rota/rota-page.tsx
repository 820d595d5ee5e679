import { Button, MultiSelect, NumberInput, Select, Textarea, TextInput } from '@mantine/core';
import { useForm } from '@mantine/form';
import { useMutation, useQuery } from '@tanstack/react-query';
import dayjs from 'dayjs';
import { useState } from 'react';
import { may } from '../../api/policy';
import { sitesQuery } from '../../api/sites';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import { SiteTime } from '../../components/site-time';
import {
  addOverride,
  notesQuery,
  peopleQuery,
  removeOverride,
  rotaQuery,
  setRotation,
  writeNote,
  type Rota,
} from './rota-api';

const LOCAL = 'YYYY-MM-DDTHH:mm';

export function Component() {
  const { data: sites, error, isPending, refetch } = useQuery(sitesQuery);
  if (error && !sites) return <ErrorState error={error} what="The rota" onRetry={() => void refetch()} />;
  return (
    <>
      <title>Rota · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>Rota</h1>
      {isPending ? (
        <Waiting heights={[300]} />
      ) : (
        <div style={{ display: 'grid', gap: 28 }}>
          {sites.items.map(({ id, name }) => (
            <SiteRota key={id} siteId={id} siteName={name} />
          ))}
        </div>
      )}
    </>
  );
}

function SiteRota({ siteId, siteName }: { siteId: number; siteName: string }) {
  const { user } = useSession();
  const { data: rota, error, refetch } = useQuery(rotaQuery(siteId));
  if (error && !rota)
    return <ErrorState error={error} what={`The rota of ${siteName}`} onRetry={() => void refetch()} />;
  if (!rota) return <Waiting heights={[220]} />;
  return (
    <section style={{ display: 'grid', gap: 16 }}>
      <div>
        <h2 style={{ fontSize: 18 }}>{siteName}</h2>
        <div>
          {rota.onCall ? (
            <>
              On call now: <b>{rota.onCall.name}</b> until{' '}
              <SiteTime at={rota.onCall.until} timeZone={rota.timeZone} />
            </>
          ) : (
            <b style={{ color: 'var(--out)' }}>Nobody is on call now: alerts reach no one.</b>
          )}{' '}
          <span className="soft small">{rota.timeZone}</span>
        </div>
      </div>
      <div
        style={{
          display: 'grid',
          gridTemplateColumns: 'repeat(auto-fit, minmax(min(320px, 100%), 1fr))',
          gap: 18,
          alignItems: 'start',
        }}
      >
        <Shifts rota={rota} />
        <div style={{ display: 'grid', gap: 18 }}>
          {may(user, 'rota.change', siteId) && <Rotation rota={rota} />}
          {may(user, 'rota.override', siteId) && <Override rota={rota} />}
        </div>
        <Notes siteId={siteId} timeZone={rota.timeZone} writes={may(user, 'note.write', siteId)} />
      </div>
    </section>
  );
}

function Shifts({ rota }: { rota: Rota }) {
  const remove = useMutation({ mutationFn: (id: number) => removeOverride(rota.siteId, id) });
  const { user } = useSession();
  const day = (at: string): string => dayjs(at).tz(rota.timeZone).format('ddd D MMM HH:mm');
  return (
    <Card
      title="Next 14 days"
      sub={rota.layer ? `hand-over at ${rota.layer.handOverTime}` : 'no rotation yet'}
    >
      {rota.gaps.map(({ from, to }) => (
        <p key={from} style={{ color: 'var(--out)', fontWeight: 600, margin: '0 0 8px' }}>
          Nobody on call {day(from)} to {day(to)}
        </p>
      ))}
      <table className="plain-table left">
        <thead>
          <tr>
            <th>From</th>
            <th>To</th>
            <th>Who</th>
          </tr>
        </thead>
        <tbody>
          {rota.shifts.map((shift) => (
            <tr key={shift.from}>
              <td>{day(shift.from)}</td>
              <td>{day(shift.to)}</td>
              <td>
                {shift.name} {shift.override && <span className="soft small">override</span>}
              </td>
            </tr>
          ))}
        </tbody>
      </table>
      {rota.overrides.map(({ id, name, from, to, reason, userId }) => (
        <div
          key={id}
          className="small"
          style={{ marginTop: 10, display: 'flex', gap: 10, alignItems: 'center' }}
        >
          <span>
            Override: {name}, {day(from)} to {day(to)}. {reason}
          </span>
          {(may(user, 'rota.change', rota.siteId) || user?.id === userId) && (
            <Button
              size="compact-sm"
              variant="default"
              loading={remove.isPending}
              onClick={() => remove.mutate(id)}
            >
              Remove
            </Button>
          )}
        </div>
      ))}
      {remove.error && <Refusal error={remove.error} />}
    </Card>
  );
}

function Rotation({ rota }: { rota: Rota }) {
  const { data: people } = useQuery(peopleQuery);
  const form = useForm({
    initialValues: {
      members: rota.layer?.members.map(({ userId }) => String(userId)) ?? [],
      handOverTime: rota.layer?.handOverTime ?? '06:00',
      rotationDays: rota.layer?.rotationDays ?? 1,
      startDate: rota.layer?.startDate ?? dayjs().tz(rota.timeZone).format('YYYY-MM-DD'),
    },
    validate: { members: (value) => (value.length > 0 ? null : 'At least one person') },
  });
  const save = useMutation({
    mutationFn: (values: typeof form.values) =>
      setRotation(rota.siteId, { ...values, members: values.members.map(Number) }),
  });
  const choices =
    people?.items
      .filter(
        ({ roles, disabled }) =>
          !disabled &&
          roles.some(
            ({ siteId, role }) => siteId === rota.siteId && role !== 'viewer' && role !== 'administrator',
          ),
      )
      .map(({ id, name }) => ({ value: String(id), label: name })) ?? [];
  return (
    <Card title="Rotation" sub="in the order of their turns">
      <form onSubmit={form.onSubmit((values) => save.mutate(values))} style={{ display: 'grid', gap: 10 }}>
        <MultiSelect label="People" data={choices} searchable {...form.getInputProps('members')} />
        <TextInput label="Hand-over" type="time" {...form.getInputProps('handOverTime')} />
        <NumberInput label="Days a turn" min={1} max={28} {...form.getInputProps('rotationDays')} />
        <TextInput label="First turn starts" type="date" {...form.getInputProps('startDate')} />
        {save.error && <Refusal error={save.error} />}
        <Button type="submit" loading={save.isPending} style={{ justifySelf: 'start' }}>
          Save the rotation
        </Button>
      </form>
    </Card>
  );
}

function Override({ rota }: { rota: Rota }) {
  const { user } = useSession();
  const now = dayjs().tz(rota.timeZone);
  const form = useForm({
    initialValues: {
      userId: user ? String(user.id) : '',
      from: now.format(LOCAL),
      to: now.add(8, 'hour').format(LOCAL),
      reason: '',
    },
    validate: {
      reason: (value) => (value.trim() ? null : 'Say why'),
      userId: (value) => (value ? null : 'Who?'),
    },
  });
  const add = useMutation({
    mutationFn: ({ userId, from, to, reason }: typeof form.values) =>
      addOverride(rota.siteId, {
        userId: Number(userId),
        from: dayjs.tz(from, rota.timeZone).toISOString(),
        to: dayjs.tz(to, rota.timeZone).toISOString(),
        reason: reason.trim(),
      }),
    onSuccess: () => form.setFieldValue('reason', ''),
  });
  const choices = new Map<number, string>(
    rota.layer?.members.map(({ userId, name }) => [userId, name]) ?? [],
  );
  if (user && user.roles.some(({ siteId, role }) => siteId === rota.siteId && role !== 'administrator'))
    choices.set(user.id, user.name);
  return (
    <Card title="Override" sub="somebody else takes over for a while">
      <form onSubmit={form.onSubmit((values) => add.mutate(values))} style={{ display: 'grid', gap: 10 }}>
        <Select
          label="Who"
          data={[...choices].map(([id, name]) => ({ value: String(id), label: name }))}
          {...form.getInputProps('userId')}
        />
        <TextInput label="From" type="datetime-local" {...form.getInputProps('from')} />
        <TextInput label="To" type="datetime-local" {...form.getInputProps('to')} />
        <TextInput label="Reason" {...form.getInputProps('reason')} />
        {add.error && <Refusal error={add.error} />}
        <Button type="submit" variant="outline" loading={add.isPending} style={{ justifySelf: 'start' }}>
          Add the override
        </Button>
      </form>
    </Card>
  );
}

function Notes({ siteId, timeZone, writes }: { siteId: number; timeZone: string; writes: boolean }) {
  const { data } = useQuery(notesQuery(siteId));
  const [text, setText] = useState('');
  const write = useMutation({
    mutationFn: () => writeNote(siteId, text.trim()),
    onSuccess: () => setText(''),
  });
  return (
    <Card title="Hand-over notes" sub="what the person on call leaves for the next one">
      {writes && (
        <form
          style={{ display: 'grid', gap: 10, marginBottom: 14 }}
          onSubmit={(event) => {
            event.preventDefault();
            write.mutate();
          }}
        >
          <Textarea
            label="New note"
            autosize
            minRows={2}
            maxLength={4000}
            value={text}
            onChange={(event) => setText(event.currentTarget.value)}
          />
          {write.error && <Refusal error={write.error} />}
          <Button
            type="submit"
            variant="outline"
            disabled={!text.trim()}
            loading={write.isPending}
            style={{ justifySelf: 'start' }}
          >
            Leave it
          </Button>
        </form>
      )}
      {data?.items.length === 0 && <p className="soft">No notes yet.</p>}
      {data?.items.map((note) => (
        <div key={note.id} style={{ borderTop: '1px solid var(--rule)', padding: '8px 0' }}>
          <span className="soft small">
            {note.by}, <SiteTime at={note.at} timeZone={timeZone} />
          </span>
          <div>{note.text}</div>
        </div>
      ))}
    </Card>
  );
}

function Refusal({ error }: { error: Error }) {
  return (
    <p role="alert" style={{ color: 'var(--out)', margin: 0 }}>
      {error.message}
    </p>
  );
}
