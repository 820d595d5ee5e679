import { significant } from '../components/quantity';
import { onSite } from '../components/site-clock';
import { roundMarks, TableView, useChartWidth, useReading } from './chart-frame';

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
  const { ref, width } = useChartWidth();
  const times = points.map((point) => Date.parse(point.at));
  const from = times[0] ?? 0;
  const to = times.at(-1) ?? 0;
  const { at, reading } = useReading({
    count: points.length,
    nearest: (px) => {
      const wanted = from + ((px - LEFT) * (to - from)) / (width - LEFT - RIGHT);
      let nearest = 0;
      for (let i = 1; i < times.length; i++)
        if (Math.abs(times[i]! - wanted) < Math.abs(times[nearest]! - wanted)) nearest = i;
      return nearest;
    },
  });
  if (points.length < 2)
    return (
      <p className="soft" style={{ minHeight: height }} ref={ref}>
        {title}: not enough windows of production moves yet.
      </p>
    );
  const bounds =
    baseline !== null && tolerancePct
      ? [baseline * (1 - tolerancePct / 100), baseline * (1 + tolerancePct / 100)]
      : [];
  // Wide intervals of single windows must not flatten everything else: the scale follows the values.
  const values = points.map(({ value }) => value);
  const low = Math.min(...values, ...bounds, baseline ?? Infinity);
  const high = Math.max(...values, ...bounds, baseline ?? -Infinity);
  const room = (high - low) * 0.12 || Math.abs(high) * 0.05 || 1;
  const x = (t: number): number => LEFT + ((width - LEFT - RIGHT) * (t - from)) / Math.max(1, to - from);
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
  const decided = points.flatMap(({ drifted }, i) => (drifted && !points[i - 1]?.drifted ? [i] : []));
  const format = to - from > 2 * 86_400_000 ? 'D MMM' : 'HH:mm';
  const read = at === null ? null : points[at]!;
  return (
    <figure style={{ margin: 0 }} ref={ref}>
      <svg
        width={width}
        height={height}
        role="img"
        aria-label={`${title} over time, arrow keys to read`}
        {...reading}
        style={{ display: 'block', maxWidth: '100%', touchAction: 'pan-y' }}
      >
        <text x="0" y="13" fontSize="12.5" fill="var(--soft)">
          {title}, {unit}
        </text>
        {baseline !== null && (
          <>
            <path d={`M${LEFT} ${y(baseline)}H${width - RIGHT}`} stroke="var(--soft)" />
            <text x={LEFT - 6} y={y(baseline) + 4} fontSize="12" textAnchor="end" fill="var(--soft)">
              {significant(baseline)}
            </text>
          </>
        )}
        {bounds.map((bound) => (
          <g key={bound}>
            <path d={`M${LEFT} ${y(bound)}H${width - RIGHT}`} stroke="var(--out)" strokeDasharray="2 4" />
            <text x={LEFT - 6} y={y(bound) + 4} fontSize="12" textAnchor="end" fill="var(--out)">
              {significant(bound)}
            </text>
          </g>
        ))}
        {baseline === null &&
          roundMarks(low, high, 3).map((mark) => (
            <g key={mark}>
              <path d={`M${LEFT} ${y(mark)}H${width - RIGHT}`} stroke="var(--rule)" />
              <text x={LEFT - 6} y={y(mark) + 4} fontSize="12" textAnchor="end" fill="var(--soft)">
                {String(mark).replace('-', '−')}
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
        {decided.map((index, i) => {
          const place = x(times[index]!);
          const left = place > width / 2;
          return (
            <g key={index}>
              <path d={`M${place} ${TOP}V${height - BOTTOM}`} stroke="var(--out)" />
              {i === decided.length - 1 && (
                <text
                  x={place + (left ? -5 : 5)}
                  y={TOP + 10}
                  fontSize="12"
                  fill="var(--out)"
                  textAnchor={left ? 'end' : 'start'}
                >
                  drift decided
                </text>
              )}
            </g>
          );
        })}
        {[from, (from + to) / 2, to].map((t, i) => (
          <text
            key={t}
            x={x(t)}
            y={height - 7}
            fontSize="12"
            fill="var(--soft)"
            textAnchor={(['start', 'middle', 'end'] as const)[i]}
          >
            {onSite(t, timeZone).format(format)}
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
          ? `${onSite(read.at, timeZone).format('D MMM, HH:mm:ss')}: ${significant(read.value, 4)} ${unit}, 95 % ${significant(read.low, 4)} … ${significant(read.high, 4)}`
          : `solid value with its 95 % band${tolerancePct ? ', dotted tolerance' : ''}${points.some(({ ewma }) => ewma !== undefined) ? ', ochre EWMA and its limits' : ''}`}
      </figcaption>
      <TableView
        columns={['at', unit, 'low', 'high']}
        rows={() =>
          [...points]
            .reverse()
            .map((point) => [
              onSite(point.at, timeZone).format('D MMM, HH:mm:ss'),
              significant(point.value, 4),
              significant(point.low, 4),
              significant(point.high, 4),
            ])
        }
      />
    </figure>
  );
}
