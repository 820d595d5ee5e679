import { Button, Checkbox, PasswordInput, Textarea, TextInput } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import dayjs from 'dayjs';
import { useState } from 'react';
import { Link } from 'react-router-dom';
import { Caution } from '../../components/caution';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { significant } from '../../components/quantity';
import { GAIN_ROWS } from './gain-rows';
import { takeStep, type Proposal, type Step, type StepInput } from './proposals-api';

type Doable = Exclude<Step, 'alter'>;

const LABELS: Record<Doable, string> = {
  submit: 'Send for review',
  approve: 'Approve',
  decline: 'Decline',
  withdraw: 'Withdraw',
  schedule: 'Schedule',
  apply: 'Apply at the machine',
  keep: 'Keep the new gains',
  'roll-back': 'Roll back',
};

/** What leads on is filled; what ends or undoes is outlined. */
const LEADS_ON: readonly Doable[] = ['submit', 'approve', 'schedule', 'apply', 'keep'];

/** The steps that this person may take now; each asks once and names what it does. */
export function ProposalActions({ proposal }: { proposal: Proposal }) {
  const [open, setOpen] = useState<Doable | null>(null);
  const step = useMutation({
    mutationFn: (input: StepInput) => takeStep(proposal, input),
    onSuccess: () => setOpen(null),
  });
  const doable = proposal.actions.filter((action): action is Doable => action !== 'alter');
  const ordered = [...doable].sort((a, b) => Number(LEADS_ON.includes(a)) - Number(LEADS_ON.includes(b)));
  const show = (action: Doable): void => {
    step.reset();
    setOpen(action);
  };
  const dialog = {
    proposal,
    problem: step.error?.message ?? null,
    loading: step.isPending,
    onTake: (input: StepInput) => step.mutate(input),
    onClose: () => setOpen(null),
  };
  return (
    <div className="no-print" style={{ display: 'flex', gap: 10, flexWrap: 'wrap' }}>
      {proposal.state === 'in review' && !doable.includes('approve') && proposal.refusals.approve && (
        <span className="soft small" style={{ alignSelf: 'center', maxWidth: 260 }}>
          {proposal.refusals.approve}
        </span>
      )}
      {ordered.map((action) => (
        <Button
          key={action}
          variant={LEADS_ON.includes(action) ? 'filled' : 'outline'}
          onClick={() => show(action)}
        >
          {action === 'approve' ? `Approve version ${proposal.version}` : LABELS[action]}
        </Button>
      ))}
      {(open === 'submit' || open === 'approve' || open === 'withdraw' || open === 'keep') && (
        <PlainStep {...dialog} step={open} />
      )}
      {(open === 'decline' || open === 'roll-back') && <ReasonedStep {...dialog} step={open} />}
      {open === 'schedule' && <ScheduleStep {...dialog} />}
      {open === 'apply' && <ApplyStep {...dialog} />}
    </div>
  );
}

interface DialogProps {
  proposal: Proposal;
  problem: string | null;
  loading: boolean;
  onTake: (input: StepInput) => void;
  onClose: () => void;
}

const EXPLAINED: Record<'submit' | 'approve' | 'withdraw' | 'keep', (proposal: Proposal) => string> = {
  submit: () => 'Somebody else with the approver’s role will look at it.',
  approve: ({ version }) =>
    `Your approval is of version ${version} as it stands here; any alteration ends it. The gains go to the machine only in a scheduled window.`,
  withdraw: () => 'The proposal ends here. Drift that goes on raises a new one.',
  keep: ({ trial }) =>
    `The new gains stay, and the plant as identified now becomes the baseline. ${trial?.verdict === 'waiting' ? 'The trial has not seen enough moves to judge yet.' : (trial?.sentence ?? '')}`,
};

function PlainStep({ step, proposal, onTake, ...rest }: DialogProps & { step: keyof typeof EXPLAINED }) {
  return (
    <ConfirmDialog
      opened
      title={`${LABELS[step]}: ${proposal.axisTag}, version ${proposal.version}`}
      confirmLabel={LABELS[step]}
      onConfirm={() => onTake({ step })}
      {...rest}
    >
      {EXPLAINED[step](proposal)}
    </ConfirmDialog>
  );
}

function ReasonedStep({ step, proposal, onTake, ...rest }: DialogProps & { step: 'decline' | 'roll-back' }) {
  const [reason, setReason] = useState('');
  return (
    <ConfirmDialog
      opened
      danger
      title={`${LABELS[step]}: ${proposal.axisTag}`}
      confirmLabel={LABELS[step]}
      disabled={!reason.trim()}
      onConfirm={() => onTake({ step, reason: reason.trim() })}
      {...rest}
    >
      {step === 'roll-back' && (
        <>
          <Caution>The former gains of revision {proposal.current.revision} are sent to the machine.</Caution>
          <p>
            The axis must be in maintenance and at rest: see{' '}
            <Link to={`/axes/${proposal.axisId}`}>{proposal.axisTag}</Link>.
          </p>
        </>
      )}
      <Textarea
        label="Reason"
        required
        autosize
        minRows={2}
        maxLength={2000}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}

const LOCAL = 'YYYY-MM-DDTHH:mm';

function ScheduleStep({ proposal, onTake, ...rest }: DialogProps) {
  const { timeZone, siteName } = proposal;
  const now = dayjs().tz(timeZone);
  const [from, setFrom] = useState(now.format(LOCAL));
  const [to, setTo] = useState(now.add(4, 'hour').format(LOCAL));
  const at = (local: string): Date => dayjs.tz(local, timeZone).toDate();
  return (
    <ConfirmDialog
      opened
      title={`Schedule: ${proposal.axisTag}`}
      confirmLabel="Schedule"
      disabled={!from || !to}
      onConfirm={() => onTake({ step: 'schedule', from: at(from), to: at(to) })}
      {...rest}
    >
      <p style={{ marginTop: 0 }}>
        The maintenance window, on {siteName}’s clock ({timeZone}). Outside it nothing can be sent.
      </p>
      <TextInput
        type="datetime-local"
        label="From"
        value={from}
        onChange={(event) => setFrom(event.currentTarget.value)}
      />
      <TextInput
        type="datetime-local"
        label="To"
        mt="sm"
        value={to}
        onChange={(event) => setTo(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}

/** Twice: first what is confirmed at the machine, then what exactly will be sent. */
function ApplyStep({ proposal, problem, onTake, ...rest }: DialogProps) {
  const [checked, setChecked] = useState<Record<string, boolean>>({});
  const [password, setPassword] = useState('');
  const [ready, setReady] = useState(false);
  const complete = proposal.checklist.every(({ key }) => checked[key]);
  const { axisTag, version, current, proposed } = proposal;
  if (ready && proposed)
    return (
      <ConfirmDialog
        opened
        danger
        title={`Send now: ${axisTag}`}
        confirmLabel={`Send the gains to ${axisTag}`}
        problem={problem}
        onConfirm={() => onTake({ step: 'apply', checklist: checked, password })}
        {...rest}
      >
        <Caution />
        <p>
          Version {version} leaves now, once. Revision {current.revision} stays in the record and can be asked
          for again.
        </p>
        <table className="plain-table">
          <thead>
            <tr>
              <th>Gain</th>
              <th>now</th>
              <th>will be</th>
            </tr>
          </thead>
          <tbody>
            {GAIN_ROWS.map(([name, label, unit]) => (
              <tr key={name}>
                <td>
                  {label} <span className="soft small">{unit}</span>
                </td>
                <td>{significant(current.gains[name], 4)}</td>
                <td>
                  <b>{significant(proposed.gains[name], 4)}</b>
                </td>
              </tr>
            ))}
          </tbody>
        </table>
        <Button variant="subtle" mt="sm" onClick={() => setReady(false)}>
          Back to the checklist
        </Button>
      </ConfirmDialog>
    );
  return (
    <ConfirmDialog
      opened
      title={`Apply at the machine: ${axisTag}`}
      confirmLabel="Go on"
      disabled={!complete || !password}
      problem={problem}
      onConfirm={() => setReady(true)}
      {...rest}
    >
      <Caution />
      <p>
        Put <Link to={`/axes/${proposal.axisId}`}>{axisTag}</Link> in maintenance and wait until it rests. The
        gains count as applied only when the machine reads the same ones back.
      </p>
      <div style={{ display: 'grid', gap: 10 }}>
        {proposal.checklist.map(({ key, text }) => (
          <Checkbox
            key={key}
            label={text}
            checked={checked[key] ?? false}
            onChange={(event) => {
              const on = event.currentTarget.checked;
              setChecked((former) => ({ ...former, [key]: on }));
            }}
          />
        ))}
      </div>
      <PasswordInput
        label="Your password, once more"
        mt="md"
        autoComplete="current-password"
        visibilityToggleButtonProps={{ 'aria-label': 'Show or hide the password' }}
        value={password}
        onChange={(event) => setPassword(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}
