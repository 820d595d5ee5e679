import { useQuery } from '@tanstack/react-query';
import { Bode, type BodeCurve } from '../../charts/bode';
import { PoleMap } from '../../charts/pole-map';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import type { Schemas } from '../../api/client';
import type { Axis } from '../fleet/fleet-api';
import { loopQuery } from './axis-api';
import classes from './axis-page.module.css';

type Answer = Schemas['DesignAnswerDto'];

const number = (value: number | null | undefined, digits: number, none = 'none'): string =>
  value == null ? none : value.toFixed(digits);

const ROWS: { label: string; of: (answer: Answer) => string }[] = [
  { label: 'bandwidth, Hz', of: ({ closedLoop }) => number(closedLoop.bandwidthHz, 2) },
  { label: 'phase margin, °', of: ({ margins }) => number(margins.phaseMarginDeg, 1) },
  { label: 'gain margin up, dB', of: ({ margins }) => number(margins.gainMarginHighDb, 1) },
  { label: 'gain margin down, dB', of: ({ margins }) => number(margins.gainMarginLowDb, 1) },
  { label: 'largest sensitivity Ms', of: ({ margins }) => number(margins.maxSensitivity, 2) },
  {
    label: 'delay margin, ms',
    of: ({ margins }) => number(margins.delayMargin == null ? null : margins.delayMargin * 1000, 2),
  },
  { label: 'sampled loop', of: ({ sampled }) => (sampled.stable ? 'stable' : 'not stable') },
  { label: 'output ripple, % RMS', of: ({ sampled }) => number(sampled.outputRippleRms, 3) },
];

const curveOf = (label: string, { frequencyResponse }: Answer): BodeCurve => ({
  label,
  frequencyHz: frequencyResponse.frequencyHz,
  ...frequencyResponse.openLoop,
});

/** The loop of the present gains: on the plant they were computed for, and on the plant as identified. */
export function LoopCard({ axis }: { axis: Axis }) {
  const designed = useQuery(loopQuery(axis, axis.baseline));
  const { estimate } = axis;
  // Rounded, so that the loop is not computed anew for every trembling of the estimate.
  const plant = estimate && {
    gain: Number(estimate.gain.value.toPrecision(3)),
    pole: Number(estimate.pole.value.toPrecision(3)),
  };
  const now = useQuery({ ...loopQuery(axis, plant), placeholderData: (former) => former });
  if (designed.error)
    return <ErrorState error={designed.error} what="The loop" onRetry={() => void designed.refetch()} />;
  return (
    <Card
      title="The loop"
      sub={`gains of revision ${axis.revision} on the baseline plant, and on the plant as identified`}
    >
      {designed.data ? (
        <>
          <div className={classes.loop}>
            <PoleMap
              sets={[
                ...(now.data ? [{ label: 'as it runs', poles: now.data.closedLoop.poles }] : []),
                { label: 'as designed', poles: designed.data.closedLoop.poles, faint: true },
              ]}
            />
            <Bode
              curves={[
                ...(now.data ? [curveOf('as it runs', now.data)] : []),
                { ...curveOf('as designed', designed.data), dashed: true },
              ]}
            />
          </div>
          <table className="plain-table">
            <thead>
              <tr>
                <th>Figure</th>
                <th>designed</th>
                <th>as it runs</th>
              </tr>
            </thead>
            <tbody>
              {ROWS.map(({ label, of }) => (
                <tr key={label}>
                  <td>{label}</td>
                  <td>{of(designed.data)}</td>
                  <td>{now.data ? <b style={{ fontWeight: 600 }}>{of(now.data)}</b> : '–'}</td>
                </tr>
              ))}
            </tbody>
          </table>
          <p className="small soft" style={{ margin: '8px 0 0' }}>
            “none”: the loop never gets there, as with a closed loop that full feed-forward makes follow at
            every frequency.
          </p>
        </>
      ) : axis.baseline && axis.gains ? (
        <Waiting heights={[240, 300]} />
      ) : (
        <p className="soft">It needs a baseline and gains: commission the axis first.</p>
      )}
    </Card>
  );
}
