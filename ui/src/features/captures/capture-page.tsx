import { Button, Select } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useState, type ReactNode } from 'react';
import { Link, useNavigate, useParams } from 'react-router-dom';
import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { MoveChart } from '../../charts/move-chart';
import { Card } from '../../components/card';
import { ConfirmDialog } from '../../components/confirm-dialog';
import { ErrorState, Waiting } from '../../components/notices';
import { Quantity, significant } from '../../components/quantity';
import { SiteTime } from '../../components/site-time';
import { axesQuery } from '../fleet/fleet-api';
import { captureWord } from './capture-list';
import {
  cancelCapture,
  captureQuery,
  captureTraceQuery,
  download,
  removeCapture,
  saveAs,
  takeAsBaseline,
  type Capture,
} from './captures-api';
import classes from './captures.module.css';

export function Component() {
  const id = Number(useParams().id);
  const { data: capture, error, refetch } = useQuery(captureQuery(id));
  if (error && !capture)
    return <ErrorState error={error} what={`Capture ${id}`} onRetry={() => void refetch()} />;
  if (!capture) return <Waiting heights={[80, 300, 300]} />;
  const open = capture.status === 'queued' || capture.status === 'running';
  return (
    <>
      <title>{`${capture.fileName} · Polewright`}</title>
      <div className="soft small">
        <Link to="/captures">Captures</Link>
        {capture.axisId !== null && (
          <>
            {' / '}
            <Link to={`/axes/${capture.axisId}`}>{capture.axisTag}</Link>
          </>
        )}
      </div>
      <h1 style={{ overflowWrap: 'anywhere' }}>{capture.fileName}</h1>
      <p className="soft" style={{ margin: '4px 0 18px' }}>
        <SiteTime at={capture.createdAt} timeZone={capture.timeZone} /> by{' '}
        {capture.createdBy ?? 'the service'}
        {capture.samples !== null &&
          `; ${capture.samples.toLocaleString('en-GB')} samples every ${significant(1000 * capture.sampleTime!)} ms, ${significant(capture.duration!)} s`}
        {capture.alertId !== null && (
          <>
            {'; kept around '}
            <Link to={`/alerts/${capture.alertId}`}>alert {capture.alertId}</Link>
          </>
        )}
      </p>
      {open && <Open capture={capture} />}
      {capture.status === 'failed' && (
        <Card title="It could not be used">
          <p role="alert">{capture.problem}</p>
          <p className="soft">Nothing of the file was kept. Mend it and upload it again.</p>
        </Card>
      )}
      {capture.identification && <Result capture={capture} />}
    </>
  );
}

function Open({ capture }: { capture: Capture }) {
  const { user } = useSession();
  const cancel = useMutation({ mutationFn: () => cancelCapture(capture.id) });
  return (
    <Card title={captureWord(capture)} sub="this page follows; you may leave it and come back">
      {may(user, 'capture.take', capture.siteId) && (
        <Button variant="default" loading={cancel.isPending} onClick={() => cancel.mutate()} mt={10}>
          Cancel
        </Button>
      )}
      {cancel.error && <p role="alert">{cancel.error.message}</p>}
    </Card>
  );
}

function Result({ capture }: { capture: Capture }) {
  const {
    gain,
    pole,
    gainForward,
    gainReverse,
    coulomb,
    bias,
    deadTime,
    fitPct,
    movingSeconds,
    verdict,
    remarks,
  } = capture.identification!;
  const rows: [label: string, unit: string, value: ReactNode][] = [
    ['gain K', '(mm/s)/%', gain && <Quantity {...gain} />],
    ['K⁺ forward', '(mm/s)/%', gainForward && <Quantity {...gainForward} />],
    ['K⁻ reverse', '(mm/s)/%', gainReverse && <Quantity {...gainReverse} />],
    ['pole α', 'rad/s', pole && <Quantity {...pole} />],
    ['dry friction f', '%', coulomb && <Quantity {...coulomb} />],
    ['bias b', '%', bias && <Quantity {...bias} />],
    ['dead time τ', 'ms', deadTime === null ? null : (1000 * deadTime).toFixed(2)],
    ['fit of the velocity', '%', fitPct === null ? null : fitPct.toFixed(1)],
    ['motion', 's', movingSeconds.toFixed(1)],
  ];
  return (
    <div className={classes.result}>
      <Card title={`Plant, ${verdict}`} sub="values with half their 95 % intervals">
        <table className="plain-table">
          <tbody>
            {rows
              .filter(([, , value]) => value)
              .map(([label, unit, value]) => (
                <tr key={label}>
                  <td>
                    {label}, <span className="soft small">{unit}</span>
                  </td>
                  <td>{value}</td>
                </tr>
              ))}
          </tbody>
        </table>
        {remarks.map((remark) => (
          <p key={remark} className="small" style={{ margin: '6px 0 0' }}>
            {remark}
          </p>
        ))}
        <Actions capture={capture} />
      </Card>
      <Traces capture={capture} />
    </div>
  );
}

function Actions({ capture }: { capture: Capture }) {
  const { user } = useSession();
  const navigate = useNavigate();
  const [asking, setAsking] = useState<'baseline' | 'remove' | null>(null);
  const [axisId, setAxisId] = useState(capture.axisId);
  const axes = useQuery({ ...axesQuery({}), enabled: asking === 'baseline' });
  const axis = axes.data?.items.find(({ id }) => id === axisId);
  const baseline = useMutation({
    mutationFn: () => takeAsBaseline(capture.id, axisId!),
    onSuccess: () => navigate(`/axes/${axisId}`),
  });
  const remove = useMutation({
    mutationFn: () => removeCapture(capture.id),
    onSuccess: () => navigate('/captures'),
  });
  const save = useMutation({
    mutationFn: (file: 'trace.csv' | 'trace.json' | 'result.csv') =>
      download(`/api/v1/captures/${capture.id}/${file}`, `capture-${capture.id}-${file}`),
  });
  const { identification } = capture;
  return (
    <div className="no-print" style={{ display: 'flex', gap: 8, flexWrap: 'wrap', marginTop: 14 }}>
      {may(user, 'axis.baseline', capture.siteId) && identification?.verdict === 'usable' && (
        <Button size="xs" onClick={() => setAsking('baseline')}>
          Make this the baseline …
        </Button>
      )}
      <Button size="xs" variant="default" onClick={() => save.mutate('trace.csv')}>
        Trace as CSV
      </Button>
      <Button size="xs" variant="default" onClick={() => save.mutate('trace.json')}>
        Trace as JSON
      </Button>
      <Button size="xs" variant="default" onClick={() => save.mutate('result.csv')}>
        Result as CSV
      </Button>
      <Button
        size="xs"
        variant="default"
        onClick={() =>
          saveAs(
            new Blob([JSON.stringify(capture, null, 2)], { type: 'application/json' }),
            `capture-${capture.id}-result.json`,
          )
        }
      >
        Result as JSON
      </Button>
      {may(user, 'capture.take', capture.siteId) && (
        <Button size="xs" variant="default" onClick={() => setAsking('remove')}>
          Remove …
        </Button>
      )}
      {save.error && (
        <p role="alert" style={{ width: '100%', margin: 0 }}>
          {save.error.message}
        </p>
      )}
      <ConfirmDialog
        opened={asking === 'baseline'}
        title="Make this the baseline"
        confirmLabel={axis ? `This is how ${axis.tag} should be` : 'Choose the axis'}
        disabled={!axis}
        loading={baseline.isPending}
        problem={baseline.error?.message ?? null}
        onConfirm={() => baseline.mutate()}
        onClose={() => setAsking(null)}
      >
        {capture.axisId === null && (
          <Select
            label="Axis"
            searchable
            data={(axes.data?.items ?? [])
              .filter(({ siteId }) => siteId === capture.siteId)
              .map(({ id, tag }) => ({ value: String(id), label: tag }))}
            value={axisId === null ? null : String(axisId)}
            onChange={(value) => setAxisId(value === null ? null : Number(value))}
          />
        )}
        {axis && identification?.gain && identification.pole && (
          <p>
            Drift of {axis.tag} is judged from now on against K = {significant(identification.gain.value)}{' '}
            (mm/s)/% and α = {significant(identification.pole.value)} rad/s
            {axis.baseline &&
              ` instead of ${significant(axis.baseline.gain)} and ${significant(axis.baseline.pole)}`}
            . The control chart learns its spread anew. No gains change.
          </p>
        )}
      </ConfirmDialog>
      <ConfirmDialog
        opened={asking === 'remove'}
        title={`Remove ${capture.fileName}`}
        confirmLabel="Remove it"
        danger
        loading={remove.isPending}
        problem={remove.error?.message ?? null}
        onConfirm={() => remove.mutate()}
        onClose={() => setAsking(null)}
      >
        Its trace and result are deleted. What was decided from it stays.
      </ConfirmDialog>
    </div>
  );
}

function Traces({ capture }: { capture: Capture }) {
  const { data, error, refetch } = useQuery(captureTraceQuery(capture.id, capture.status === 'done'));
  if (error) return <ErrorState error={error} what="The trace" onRetry={() => void refetch()} />;
  if (!data) return <Waiting heights={[480]} />;
  // A hole in the record is a hole in the line.
  const series = (label: string, values: readonly (number | null)[], look: object = {}) => ({
    label,
    time: data.time,
    values: values.map((value) => value ?? NaN),
    ...look,
  });
  const targets = data.target.some((value) => value !== null);
  return (
    <Card
      title="Traces"
      sub="thinned by extremes; simulated with the identified plant, from each move’s own start"
    >
      <div className={classes.charts}>
        <MoveChart
          title="velocity"
          unit="mm/s"
          digits={1}
          height={220}
          series={[
            series('simulated', data.simulatedVelocity),
            series('measured', data.velocity, { dashed: true }),
          ]}
        />
        <MoveChart
          title="position residual"
          unit="mm"
          digits={4}
          height={220}
          series={[series('measured less simulated', data.residual)]}
        />
        <MoveChart
          title="position"
          unit="mm"
          height={220}
          series={[
            series('measured', data.position),
            ...(targets ? [series('target', data.target, { dotted: true })] : []),
          ]}
        />
        <MoveChart title="output" unit="%" digits={1} height={220} series={[series('output', data.output)]} />
      </div>
    </Card>
  );
}
