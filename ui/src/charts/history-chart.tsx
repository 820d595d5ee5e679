import dayjs from 'dayjs';
import { useState, type KeyboardEvent, type PointerEvent } from 'react';
import { significant } from '../components/quantity';

export interface HistoryPoint {
  at: string;
  value: number;
  low: number;
  high: number;
  /** EWMA with its limits, where the control chart runs. */
  ewma?: number;
  limitLow?: number | null;
  limitHigh?: number | null;
  /** Where drift is decided. */
  drifted?: boolean;
}

const WIDTH = 640;
const LEFT = 54;
const RIGHT = 8;
const TOP = 22;
const BOTTOM = 24;

/**
 * A quantity over time: value with its 95 % interval as a band, baseline and tolerance as lines, the control chart's
 * EWMA and limits, and where drift was decided. Arrow keys or the pointer read it.
 */
export function HistoryChart({
  title,
  unit,
  points,
  baseline,
  tolerancePct,
  timeZone,
  height = 180,
}: {
  title: string;
  unit: string;
  points: readonly HistoryPoint[];
  baseline: number | null;
  tolerancePct?: number;
  timeZone: string;
  height?: number;
}) {
  const [at, setAt] = useState<number | null>(null);
  if (points.length < 2)
    return (
      <p className="soft" style={{ minHeight: height }}>
        {title}: not enough windows of production moves yet.
      </p>
    );
  const times = points.map((point) => Date.parse(point.at));
  const from = times[0]!;
  const to = times.at(-1)!;
  const bounds =
    baseline !== null && tolerancePct
      ? [baseline * (1 - tolerancePct / 100), baseline * (1 + tolerancePct / 100)]
      : [];
  // Wide intervals of single windows must not flatten everything else: the scale follows the values.
  const values = points.map(({ value }) => value);
  const low = Math.min(...values, ...bounds, baseline ?? Infinity);
  const high = Math.max(...values, ...bounds, baseline ?? -Infinity);
  const room = (high - low) * 0.12 || Math.abs(high) * 0.05 || 1;
  const x = (t: number): number => LEFT + ((WIDTH - LEFT - RIGHT) * (t - from)) / Math.max(1, to - from);
  const y = (v: number): number => {
    const clamped = Math.min(high + room, Math.max(low - room, v));
    return TOP + ((height - TOP - BOTTOM) * (high + room - clamped)) / (high - low + 2 * room);
  };
  const line = (of: (point: HistoryPoint) => number | null | undefined): string => {
    let pen = 'M';
    return points
      .map((point, i) => {
        const v = of(point);
        if (v == null) {
          pen = 'M';
          return '';
        }
        const step = `${pen}${x(times[i]!).toFixed(1)} ${y(v).toFixed(1)}`;
        pen = 'L';
        return step;
      })
      .join('');
  };
  const band = `${line(({ high: v }) => v)}${[...points]
    .map((point, i) => `L${x(times[i]!).toFixed(1)} ${y(point.low).toFixed(1)}`)
    .reverse()
    .join('')}Z`;
  const decided = points.findIndex(({ drifted }) => drifted);
  const move = (index: number): void => setAt(Math.min(points.length - 1, Math.max(0, index)));
  const onPointer = (event: PointerEvent<SVGSVGElement>): void => {
    const box = event.currentTarget.getBoundingClientRect();
    const t =
      from +
      (((event.clientX - box.left) / box.width) * WIDTH - LEFT) * ((to - from) / (WIDTH - LEFT - RIGHT));
    let nearest = 0;
    for (let i = 1; i < times.length; i++)
      if (Math.abs(times[i]! - t) < Math.abs(times[nearest]! - t)) nearest = i;
    move(nearest);
  };
  const onKey = (event: KeyboardEvent): void => {
    const step = { ArrowLeft: -1, ArrowRight: 1, Home: -points.length, End: points.length }[event.key];
    if (step === undefined) return;
    event.preventDefault();
    move((at ?? points.length - 1) + step);
  };
  const format = to - from > 2 * 86_400_000 ? 'D MMM' : 'HH:mm';
  const read = at === null ? null : points[at]!;
  return (
    <figure style={{ margin: 0 }}>
      <svg
        width="100%"
        viewBox={`0 0 ${WIDTH} ${height}`}
        role="img"
        tabIndex={0}
        aria-label={`${title} over time, arrow keys to read`}
        onPointerMove={onPointer}
        onPointerLeave={() => setAt(null)}
        onKeyDown={onKey}
        onBlur={() => setAt(null)}
        style={{ display: 'block', touchAction: 'pan-y' }}
      >
        <text x="0" y="13" fontSize="12.5" fill="var(--soft)">
          {title}, {unit}
        </text>
        {baseline !== null && (
          <>
            <path d={`M${LEFT} ${y(baseline)}H${WIDTH - RIGHT}`} stroke="var(--soft)" />
            <text x={LEFT - 6} y={y(baseline) + 4} fontSize="12" textAnchor="end" fill="var(--soft)">
              {significant(baseline)}
            </text>
          </>
        )}
        {bounds.map((bound) => (
          <g key={bound}>
            <path d={`M${LEFT} ${y(bound)}H${WIDTH - RIGHT}`} stroke="var(--out)" strokeDasharray="2 4" />
            <text x={LEFT - 6} y={y(bound) + 4} fontSize="12" textAnchor="end" fill="var(--out)">
              {significant(bound)}
            </text>
          </g>
        ))}
        <path d={band} fill="var(--ink)" fillOpacity=".14" />
        <path
          d={line(({ limitHigh }) => limitHigh)}
          fill="none"
          stroke="var(--drift)"
          strokeDasharray="6 3"
        />
        <path d={line(({ limitLow }) => limitLow)} fill="none" stroke="var(--drift)" strokeDasharray="6 3" />
        <path d={line(({ ewma }) => ewma)} fill="none" stroke="var(--drift)" strokeWidth="1.2" />
        <path d={line(({ value }) => value)} fill="none" stroke="var(--ink)" strokeWidth="1.8" />
        {decided >= 0 && (
          <g>
            <path d={`M${x(times[decided]!)} ${TOP}V${height - BOTTOM}`} stroke="var(--out)" />
            <text
              x={x(times[decided]!) + (x(times[decided]!) > WIDTH / 2 ? -5 : 5)}
              y={TOP + 10}
              fontSize="12"
              fill="var(--out)"
              textAnchor={x(times[decided]!) > WIDTH / 2 ? 'end' : 'start'}
            >
              drift decided
            </text>
          </g>
        )}
        {[from, (from + to) / 2, to].map((t, i) => (
          <text
            key={t}
            x={x(t)}
            y={height - 7}
            fontSize="12"
            fill="var(--soft)"
            textAnchor={(['start', 'middle', 'end'] as const)[i]}
          >
            {dayjs(t).tz(timeZone).format(format)}
          </text>
        ))}
        {at !== null && (
          <circle
            cx={x(times[at]!)}
            cy={y(points[at]!.value)}
            r="4"
            fill="none"
            stroke="var(--press)"
            strokeWidth="2"
          />
        )}
      </svg>
      <figcaption className="small soft" aria-live="polite" style={{ minHeight: 19 }}>
        {read
          ? `${dayjs(read.at).tz(timeZone).format('D MMM, HH:mm:ss')}: ${significant(read.value, 4)} ${unit}, 95 % ${significant(read.low, 4)} … ${significant(read.high, 4)}`
          : `solid value with its 95 % band${tolerancePct ? ', dotted tolerance' : ''}${points.some(({ ewma }) => ewma !== undefined) ? ', ochre EWMA and its limits' : ''}`}
      </figcaption>
      <details className="small no-print">
        <summary className="soft">The same as a table</summary>
        <div style={{ maxHeight: 240, overflow: 'auto' }}>
          <table className="plain-table">
            <thead>
              <tr>
                <th>at</th>
                <th>{unit}</th>
                <th>low</th>
                <th>high</th>
              </tr>
            </thead>
            <tbody>
              {[...points].reverse().map((point) => (
                <tr key={point.at}>
                  <td>{dayjs(point.at).tz(timeZone).format('D MMM, HH:mm:ss')}</td>
                  <td>{significant(point.value, 4)}</td>
                  <td>{significant(point.low, 4)}</td>
                  <td>{significant(point.high, 4)}</td>
                </tr>
              ))}
            </tbody>
          </table>
        </div>
      </details>
    </figure>
  );
}
