import { Button, NumberInput, SegmentedControl, Switch, Textarea } from '@mantine/core';
import { useForm } from '@mantine/form';
import { useMutation } from '@tanstack/react-query';
import { Card } from '../../components/card';
import { alter, type Proposal } from './proposals-api';

const STRUCTURES = ['PID', 'PI-D', 'I-PD'] as const;

/** Other poles or another structure; the service places the gains and simulates the move again. */
export function Alteration({ proposal }: { proposal: Proposal }) {
  const { proposed, current, binding } = proposal;
  const form = useForm({
    initialValues: {
      structure: proposed?.structure ?? current.structure,
      lambda: Number((proposed?.lambda ?? current.lambda ?? binding?.commissionedLambda ?? 10).toFixed(2)),
      feedForward: proposed?.feedForward ?? current.feedForward,
      note: '',
    },
    validate: { lambda: (value) => (Number(value) > 0 ? null : 'λ must be above 0 rad/s') },
  });
  const change = useMutation({
    mutationFn: ({ structure, lambda, feedForward, note }: typeof form.values) =>
      alter(proposal, {
        structure,
        feedForward,
        pattern: { kind: 'triple', lambda },
        ...(note.trim() && { note: note.trim() }),
      }),
  });
  return (
    <Card title="Alter" sub="makes a new version, which wants review again">
      <form onSubmit={form.onSubmit((values) => change.mutate(values))} style={{ display: 'grid', gap: 12 }}>
        <SegmentedControl
          aria-label="Structure"
          data={[...STRUCTURES]}
          value={form.values.structure}
          onChange={(value) => form.setFieldValue('structure', value as (typeof STRUCTURES)[number])}
        />
        <NumberInput
          label="λ of the triple pole, rad/s"
          min={0.1}
          step={0.5}
          decimalScale={2}
          description={
            binding?.allowed &&
            `allowed from ${binding.allowed.low.toFixed(1)} to ${binding.allowed.high.toFixed(1)} rad/s`
          }
          {...form.getInputProps('lambda')}
        />
        <Switch
          label="Feed-forward"
          checked={form.values.feedForward}
          onChange={(event) => form.setFieldValue('feedForward', event.currentTarget.checked)}
        />
        <Textarea label="Note" autosize minRows={2} maxLength={2000} {...form.getInputProps('note')} />
        {change.error && (
          <p role="alert" style={{ color: 'var(--out)', margin: 0 }}>
            {change.error.message}
          </p>
        )}
        <Button type="submit" variant="outline" loading={change.isPending} style={{ justifySelf: 'start' }}>
          Work it out
        </Button>
      </form>
    </Card>
  );
}
