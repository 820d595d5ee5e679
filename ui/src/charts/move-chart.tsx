import { useId, useState, type KeyboardEvent, type PointerEvent } from 'react';

export interface Series {
  label: string;
  time: readonly number[];
  values: readonly number[];
  /** Before dashed, after solid, everywhere. */
  dashed?: boolean;
}

const WIDTH = 640;
const LEFT = 56;
const RIGHT = 8;
const TOP = 22;
const BOTTOM = 24;

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
  const [at, setAt] = useState<number | null>(null);
  const describedBy = useId();
  const values = series.flatMap((one) => [...one.values]);
  const largest = Math.max(1e-9, limit?.value ?? 0, ...values.map(Math.abs)) * 1.1;
  const low = Math.min(0, ...values) < 0 || limit ? -largest : 0;
  const span = Math.max(1e-9, ...series.map(({ time }) => time.at(-1) ?? 0));
  const x = (t: number): number => LEFT + ((WIDTH - LEFT - RIGHT) * t) / span;
  const y = (v: number): number => TOP + (height - TOP - BOTTOM) * (1 - (v - low) / (largest - low));
  const path = ({ time, values: v }: Series): string =>
    time.map((t, i) => `${i ? 'L' : 'M'}${x(t).toFixed(1)} ${y(v[i]!).toFixed(1)}`).join('');
  const read = (one: Series, t: number): number => {
    const i = one.time.findIndex((time) => time >= t);
    return one.values[i < 0 ? one.values.length - 1 : i] ?? 0;
  };
  const onPointer = (event: PointerEvent<SVGSVGElement>): void => {
    const box = event.currentTarget.getBoundingClientRect();
    const place = ((event.clientX - box.left) / box.width) * WIDTH;
    setAt(Math.min(span, Math.max(0, ((place - LEFT) / (WIDTH - LEFT - RIGHT)) * span)));
  };
  const onKey = (event: KeyboardEvent): void => {
    const step = { ArrowLeft: -1, ArrowRight: 1, PageUp: 10, PageDown: -10 }[event.key];
    if (step === undefined) return;
    event.preventDefault();
    setAt(Math.min(span, Math.max(0, (at ?? 0) + (step * span) / 200)));
  };
  const ticks = niceTicks(span);
  return (
    <figure style={{ margin: 0 }}>
      <svg
        width="100%"
        viewBox={`0 0 ${WIDTH} ${height}`}
        role="img"
        tabIndex={0}
        aria-label={`${title} over time`}
        aria-describedby={describedBy}
        onPointerMove={onPointer}
        onPointerLeave={() => setAt(null)}
        onKeyDown={onKey}
        onBlur={() => setAt(null)}
        style={{ display: 'block', touchAction: 'pan-y' }}
      >
        <text x="0" y="13" fontSize="12.5" fill="var(--soft)">
          {title}, {unit}
        </text>
        <path d={`M${LEFT} ${y(0)}H${WIDTH - RIGHT}`} stroke="var(--rule)" />
        {limit && (
          <>
            <path
              d={`M${LEFT} ${y(limit.value)}H${WIDTH - RIGHT}M${LEFT} ${y(-limit.value)}H${WIDTH - RIGHT}`}
              stroke="var(--out)"
              strokeDasharray="2 4"
            />
            <text x={WIDTH - RIGHT} y={y(limit.value) - 4} textAnchor="end" fontSize="12" fill="var(--out)">
              {limit.label}
            </text>
          </>
        )}
        {[largest / 1.1, 0, ...(low < 0 ? [-largest / 1.1] : [])].map((v) => (
          <text key={v} x={LEFT - 6} y={y(v) + 4} textAnchor="end" fontSize="12" fill="var(--soft)">
            {v === 0 ? '0' : v.toFixed(largest >= 10 ? 0 : digits).replace('-', '−')}
          </text>
        ))}
        {ticks.map((t) => (
          <text key={t} x={x(t)} y={height - 7} textAnchor="middle" fontSize="12" fill="var(--soft)">
            {t} s
          </text>
        ))}
        {series.map((one) => (
          <path
            key={one.label}
            d={path(one)}
            fill="none"
            stroke="var(--ink)"
            strokeWidth={one.dashed ? 1.5 : 2}
            {...(one.dashed && { strokeDasharray: '5 4', strokeOpacity: 0.7 })}
          />
        ))}
        {at !== null && <path d={`M${x(at)} ${TOP}V${height - BOTTOM}`} stroke="var(--press)" />}
      </svg>
      <figcaption id={describedBy} className="small soft" aria-live="polite" style={{ minHeight: 19 }}>
        {at === null
          ? series.map(({ label, dashed }) => `${label} ${dashed ? 'dashed' : 'solid'}`).join(', ')
          : `${at.toFixed(2)} s: ${series.map((one) => `${one.label} ${read(one, at).toFixed(digits + 1)} ${unit}`).join(', ')}`}
      </figcaption>
      <details className="small no-print">
        <summary className="soft">The same as a table</summary>
        <table className="plain-table">
          <thead>
            <tr>
              <th>s</th>
              {series.map(({ label }) => (
                <th key={label}>
                  {label}, {unit}
                </th>
              ))}
            </tr>
          </thead>
          <tbody>
            {Array.from({ length: 21 }, (_, i) => (span * i) / 20).map((t) => (
              <tr key={t}>
                <td>{t.toFixed(2)}</td>
                {series.map((one) => (
                  <td key={one.label}>{read(one, t).toFixed(digits + 1)}</td>
                ))}
              </tr>
            ))}
          </tbody>
        </table>
      </details>
    </figure>
  );
}

/** Four to eight round marks from 0 up. */
function niceTicks(span: number): number[] {
  const raw = span / 5;
  const scale = 10 ** Math.floor(Math.log10(raw));
  const step = [1, 2, 5, 10].map((m) => m * scale).find((s) => s >= raw)!;
  return Array.from({ length: Math.floor(span / step) + 1 }, (_, i) => Number((i * step).toPrecision(6)));
}
