import { Button, NumberInput } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { Problem } from '../../api/client';
import { Card } from '../../components/card';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { changeRetention, stretch, type Retention, type RetentionKind } from './storage-api';
import classes from './storage.module.css';

const HOUR = 3_600;
const DAY = 86_400;

/** The unit that a kind is set in. */
const unitOf = (kind: RetentionKind): { seconds: number; name: string } =>
  kind === 'seconds' ? { seconds: HOUR, name: 'h' } : { seconds: DAY, name: 'days' };

const NOTES: Record<RetentionKind, string> = {
  seconds: 'close-up of the last hours',
  minutes: 'with every move',
  hours: 'long-term charts',
  estimates: 'after a day the last of each hour',
  alertCaptures: 'counted from the end of the alert',
};

/** How long each resolution is kept. */
export function RetentionCard({ retention, mayChange }: { retention: Retention[]; mayChange: boolean }) {
  const [values, setValues] = useState(
    () =>
      Object.fromEntries(
        retention.map(({ kind, keptSeconds }) => [kind, keptSeconds / unitOf(kind).seconds]),
      ) as Record<RetentionKind, number | string>,
  );
  const [asking, setAsking] = useState(false);
  const save = useMutation({
    mutationFn: changeRetention,
    onSuccess: () => setAsking(false),
    onError: () => setAsking(false),
  });
  const secondsOf = (kind: RetentionKind): number => Math.round(Number(values[kind]) * unitOf(kind).seconds);
  const changed = retention.filter(({ kind, keptSeconds }) => secondsOf(kind) !== keptSeconds);
  const shorter = changed.filter(({ kind, keptSeconds }) => secondsOf(kind) < keptSeconds);
  const problems = save.error instanceof Problem ? (save.error.details.errors ?? []) : [];
  const commit = (): void =>
    save.mutate(Object.fromEntries(changed.map(({ kind }) => [kind, secondsOf(kind)])));
  return (
    <Card title="How long it is kept" sub="older rows are deleted in small steps, all the time">
      <form
        onSubmit={(event) => {
          event.preventDefault();
          if (shorter.length > 0) setAsking(true);
          else commit();
        }}
      >
        <div className={classes.fields}>
          {retention.map(({ kind, title, leastSeconds, mostSeconds, defaultSeconds }) => {
            const unit = unitOf(kind);
            return (
              <NumberInput
                key={kind}
                label={title}
                description={`${NOTES[kind]}; ${stretch(leastSeconds)} to ${stretch(mostSeconds)}, at first ${stretch(defaultSeconds)}`}
                suffix={` ${unit.name}`}
                min={0}
                allowNegative={false}
                decimalScale={2}
                disabled={!mayChange}
                value={values[kind]}
                onChange={(value) => setValues((former) => ({ ...former, [kind]: value }))}
                error={problems.find(({ path }) => path === kind)?.message}
              />
            );
          })}
        </div>
        {save.error && problems.length === 0 && (
          <p role="alert" style={{ color: 'var(--out)' }}>
            {save.error.message}
          </p>
        )}
        {mayChange ? (
          <Button
            type="submit"
            variant="outline"
            mt="md"
            loading={save.isPending}
            disabled={changed.length === 0 || changed.some(({ kind }) => values[kind] === '')}
          >
            Save
          </Button>
        ) : (
          <p className="small soft">Only who administers every site may change this.</p>
        )}
      </form>
      <ConfirmDialog
        opened={asking}
        title="Keep less from now on?"
        confirmLabel="Keep less"
        danger
        loading={save.isPending}
        onConfirm={commit}
        onClose={() => setAsking(false)}
      >
        <ul style={{ margin: 0, paddingLeft: 20 }}>
          {shorter.map(({ kind, title, keptSeconds }) => (
            <li key={kind}>
              {title}: {stretch(secondsOf(kind))} instead of {stretch(keptSeconds)}
            </li>
          ))}
        </ul>
        <p style={{ marginBottom: 0 }}>
          What is older is deleted on every site, beginning at once. Only backups still hold it then.
        </p>
      </ConfirmDialog>
    </Card>
  );
}
