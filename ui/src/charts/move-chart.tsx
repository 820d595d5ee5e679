import { useId } from 'react';
import { roundMarks, TableView, useChartWidth, useReading } from './chart-frame';

export interface Series {
  label: string;
  time: readonly number[];
  /** NaN where there is nothing: a hole in the line. */
  values: readonly number[];
  /** Before dashed, after solid, everywhere. */
  dashed?: boolean;
  /** What is asked for, not what happens: dotted. */
  dotted?: boolean;
}

const LEFT = 56;
const RIGHT = 8;
const TOP = 22;
const BOTTOM = 24;
/** Places that can be read along the time axis. */
const PLACES = 201;

/**
 * Series over time with their read-out: pointer or arrow keys move the reading line; the same numbers stand in a table
 * below for whoever wants them. Limits are dotted.
 */
export function MoveChart({
  title,
  unit,
  series,
  limit,
  height = 170,
  digits = 2,
}: {
  title: string;
  unit: string;
  series: readonly Series[];
  /** Drawn at plus and minus. */
  limit?: { value: number; label: string };
  height?: number;
  digits?: number;
}) {
  const describedBy = useId();
  const { ref, width } = useChartWidth();
  const values = series.flatMap((one) => one.values.filter((v) => !Number.isNaN(v)));
  const most = Math.max(0, ...values, limit?.value ?? 0);
  const least = Math.min(0, ...values, -(limit?.value ?? 0));
  const largest = Math.max(1e-9, most, -least);
  // Of an end that zero nearly reaches only the other is named.
  const ends = [most, least].filter((end) => Math.abs(end) > 0.15 * largest);
  const [high, low] = [1.1 * Math.max(most, 1e-9), 1.1 * least];
  const span = Math.max(1e-9, ...series.map(({ time }) => time.at(-1) ?? 0));
  const x = (t: number): number => LEFT + ((width - LEFT - RIGHT) * t) / span;
  const y = (v: number): number => TOP + (height - TOP - BOTTOM) * (1 - (v - low) / (high - low));
  const path = ({ time, values: v }: Series): string =>
    time
      .map((t, i) =>
        Number.isNaN(v[i]!)
          ? ''
          : `${i && !Number.isNaN(v[i - 1]!) ? 'L' : 'M'}${x(t).toFixed(1)} ${y(v[i]!).toFixed(1)}`,
      )
      .join('');
  const read = (one: Series, t: number): string => {
    const i = one.time.findIndex((time) => time >= t);
    const value = one.values[i < 0 ? one.values.length - 1 : i] ?? 0;
    return Number.isNaN(value) ? 'none' : value.toFixed(digits + 1).replace('-', '−');
  };
  const { at, reading } = useReading({
    count: PLACES,
    start: 0,
    nearest: (px) => Math.round(((px - LEFT) / (width - LEFT - RIGHT)) * (PLACES - 1)),
  });
  const t = at === null ? null : (span * at) / (PLACES - 1);
  return (
    <figure style={{ margin: 0 }} ref={ref}>
      <svg
        width={width}
        height={height}
        role="img"
        aria-label={`${title} over time, arrow keys to read`}
        aria-describedby={describedBy}
        {...reading}
        style={{ display: 'block', maxWidth: '100%', touchAction: 'pan-y' }}
      >
        <text x="0" y="13" fontSize="12.5" fill="var(--soft)">
          {title}, {unit}
        </text>
        <path d={`M${LEFT} ${y(0)}H${width - RIGHT}`} stroke="var(--rule)" />
        {limit && (
          <>
            <path
              d={`M${LEFT} ${y(limit.value)}H${width - RIGHT}M${LEFT} ${y(-limit.value)}H${width - RIGHT}`}
              stroke="var(--out)"
              strokeDasharray="2 4"
            />
            <text x={width - RIGHT} y={y(limit.value) - 4} textAnchor="end" fontSize="12" fill="var(--out)">
              {limit.label}
            </text>
          </>
        )}
        {[0, ...ends].map((v) => (
          <text key={v} x={LEFT - 6} y={y(v) + 4} textAnchor="end" fontSize="12" fill="var(--soft)">
            {v === 0 ? '0' : v.toFixed(largest >= 10 ? 0 : digits).replace('-', '−')}
          </text>
        ))}
        {roundMarks(0, span, Math.max(2, Math.min(6, (width - LEFT) / 70))).map((mark) => (
          <text
            key={mark}
            x={x(mark)}
            y={height - 7}
            textAnchor={x(mark) > width - 24 ? 'end' : 'middle'}
            fontSize="12"
            fill="var(--soft)"
          >
            {mark} s
          </text>
        ))}
        {series.map((one) => (
          <path
            key={one.label}
            d={path(one)}
            fill="none"
            stroke="var(--ink)"
            strokeWidth={one.dashed || one.dotted ? 1.5 : 2}
            {...(one.dashed && { strokeDasharray: '5 4', strokeOpacity: 0.7 })}
            {...(one.dotted && { strokeDasharray: '1.5 3.5' })}
          />
        ))}
        {t !== null && <path d={`M${x(t)} ${TOP}V${height - BOTTOM}`} stroke="var(--press)" />}
      </svg>
      <figcaption id={describedBy} className="small soft" aria-live="polite" style={{ minHeight: 19 }}>
        {t === null
          ? series.map((one) => `${one.label} ${strokeOf(one)}`).join(', ')
          : `${t.toFixed(2)} s: ${series.map((one) => `${one.label} ${read(one, t)} ${unit}`).join(', ')}`}
      </figcaption>
      <TableView
        columns={['s', ...series.map(({ label }) => `${label}, ${unit}`)]}
        rows={() =>
          Array.from({ length: 21 }, (_, i) => (span * i) / 20).map((at) => [
            at.toFixed(2),
            ...series.map((one) => read(one, at)),
          ])
        }
      />
    </figure>
  );
}

const strokeOf = ({ dashed, dotted }: Series): string => (dashed ? 'dashed' : dotted ? 'dotted' : 'solid');
