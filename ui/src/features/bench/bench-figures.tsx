import type { Schemas } from '../../api/client';
import { ScrollX } from '../../components/scroll-x';
import { significant } from '../../components/quantity';

type Answer = Schemas['DesignAnswerDto'];

const shown = (value: number | null | undefined, scale = 1): string =>
  value == null ? 'none' : significant(value * scale);

const ROWS: { label: string; unit: string; of: (answer: Answer) => string }[] = [
  { label: 'Kp', unit: '%/mm', of: ({ gains }) => shown(gains.kp) },
  { label: 'Ki', unit: '%/(mm·s)', of: ({ gains }) => shown(gains.ki) },
  { label: 'Kd', unit: '%·s/mm', of: ({ gains }) => shown(gains.kd) },
  { label: 'Kv', unit: '%·s/mm', of: ({ gains }) => shown(gains.kv) },
  { label: 'Ka', unit: '%·s²/mm', of: ({ gains }) => shown(gains.ka) },
  { label: 'peak following error', unit: 'mm', of: ({ move }) => shown(move?.peakFollowingError) },
  { label: 'RMS following error', unit: 'mm', of: ({ move }) => shown(move?.rmsFollowingError) },
  { label: 'peak output', unit: '%', of: ({ move }) => shown(move?.peakOutput) },
  { label: 'at the limit', unit: '% of the time', of: ({ move }) => shown(move?.saturatedPct) },
  { label: 'overshoot of the move', unit: 'mm', of: ({ move }) => shown(move?.overshoot) },
  { label: 'bandwidth', unit: 'Hz', of: ({ closedLoop }) => shown(closedLoop.bandwidthHz) },
  { label: 'peak of the closed loop', unit: 'dB', of: ({ closedLoop }) => shown(closedLoop.peakDb) },
  { label: 'step overshoot, linear', unit: '%', of: ({ step }) => shown(step.overshootPct) },
  { label: 'settling to 2 %, linear', unit: 'ms', of: ({ step }) => shown(step.settlingTime, 1000) },
  { label: 'phase margin', unit: '°', of: ({ margins }) => shown(margins.phaseMarginDeg) },
  { label: 'gain margin up', unit: 'dB', of: ({ margins }) => shown(margins.gainMarginHighDb) },
  { label: 'gain margin down', unit: 'dB', of: ({ margins }) => shown(margins.gainMarginLowDb) },
  { label: 'delay margin', unit: 'ms', of: ({ margins }) => shown(margins.delayMargin, 1000) },
  { label: 'Ms with all delays', unit: '', of: ({ sampled }) => shown(sampled.maxSensitivity) },
  { label: 'damping, sampled loop', unit: '', of: ({ sampled }) => shown(sampled.damping) },
  {
    label: 'largest stable sample time',
    unit: 'ms',
    of: ({ sampled }) => shown(sampled.maxStableSampleTime, 1000),
  },
  { label: 'output ripple', unit: '% RMS', of: ({ sampled }) => shown(sampled.outputRippleRms) },
];

/** The figures of today's gains beside those that are tried. */
export function BenchFigures({ today, tried }: { today: Answer | undefined; tried: Answer }) {
  return (
    <ScrollX label="Figures, today and tried">
      <table className="plain-table">
        <thead>
          <tr>
            <th>Figure</th>
            <th>today</th>
            <th>tried</th>
          </tr>
        </thead>
        <tbody>
          {ROWS.map(({ label, unit, of }) => (
            <tr key={label}>
              <td>
                {label}
                {unit && <span className="soft small">, {unit}</span>}
              </td>
              <td>{today ? of(today) : '–'}</td>
              <td>
                <b style={{ fontWeight: 600 }}>{of(tried)}</b>
              </td>
            </tr>
          ))}
        </tbody>
      </table>
    </ScrollX>
  );
}
