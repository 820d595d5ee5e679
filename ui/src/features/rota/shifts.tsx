import { Button } from '@mantine/core';
import { notifications } from '@mantine/notifications';
import { useMutation } from '@tanstack/react-query';
import { useState } from 'react';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { onSite } from '../../components/site-clock';
import { layerWords } from './layer-words';
import { removeOverride, type Rota } from './rota-api';
import classes from './rota.module.css';

type Override = Rota['overrides'][number];

/** Who is on call in the next two weeks, when nobody is, and who stands in. */
export function Shifts({ rota }: { rota: Rota }) {
  const { user } = useSession();
  const [removing, setRemoving] = useState<Override | null>(null);
  const day = (at: string): string => onSite(at, rota.timeZone).format('ddd D MMM HH:mm');
  return (
    <Card
      title="Next 14 days"
      sub={
        rota.layers.length > 0
          ? `${rota.layers.map(layerWords).join('; ')}; ${rota.timeZone}`
          : 'no layer yet'
      }
    >
      {rota.gaps.map(({ from, to }) => (
        <p key={from} className={classes.gap}>
          Nobody on call {day(from)} to {day(to)}
        </p>
      ))}
      {rota.shifts.length > 0 && (
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
                <td className={isNow(shift) ? classes.now : undefined}>
                  {shift.name}
                  {isNow(shift) && ', now'}{' '}
                  {(shift.override || rota.layers.length > 1) && (
                    <span className="soft small">{shift.layer ?? 'stands in'}</span>
                  )}
                </td>
              </tr>
            ))}
          </tbody>
        </table>
      )}
      {rota.overrides.map((override) => (
        <div key={override.id} className={classes.override}>
          <span>
            Override: {override.name}, {day(override.from)} to {day(override.to)}. {override.reason}
          </span>
          {may(user, 'rota.override', rota.siteId) && (
            <Button
              size="compact-sm"
              variant="default"
              aria-label={`Remove the override of ${override.name}, ${day(override.from)}`}
              onClick={() => setRemoving(override)}
            >
              Remove …
            </Button>
          )}
        </div>
      ))}
      {removing && (
        <RemoveOverride
          siteId={rota.siteId}
          override={removing}
          when={`${day(removing.from)} to ${day(removing.to)}`}
          onClose={() => setRemoving(null)}
        />
      )}
    </Card>
  );
}

/** As of the answer; the answer is renewed with every change of the rota and whenever the page is looked at again. */
const isNow = ({ from, to }: { from: string; to: string }): boolean =>
  Date.parse(from) <= Date.now() && Date.now() < Date.parse(to);

function RemoveOverride({
  siteId,
  override,
  when,
  onClose,
}: {
  siteId: number;
  override: Override;
  when: string;
  onClose: () => void;
}) {
  const remove = useMutation({
    mutationFn: () => removeOverride(siteId, override.id),
    onSuccess: () => {
      notifications.show({
        message: `${override.name} no longer stands in, ${when}.`,
        closeButtonProps: { 'aria-label': 'Close' },
      });
      onClose();
    },
  });
  return (
    <ConfirmDialog
      opened
      title={`Remove the override of ${override.name}`}
      confirmLabel="Remove it"
      loading={remove.isPending}
      problem={remove.error?.message ?? null}
      onConfirm={() => remove.mutate()}
      onClose={onClose}
    >
      {when}, “{override.reason}”. Then the rotation holds again for that time.
    </ConfirmDialog>
  );
}
