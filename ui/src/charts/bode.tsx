import { useId } from 'react';
import { significant } from '../components/quantity';
import { TableView, useChartWidth, useReading } from './chart-frame';

export interface BodeCurve {
  label: string;
  /** Hz, ascending. */
  frequencyHz: readonly number[];
  magnitudeDb: readonly number[];
  phaseDeg: readonly number[];
  /** Designed dashed, as it runs solid. */
  dashed?: boolean;
}

/** A frequency worth knowing: a letter in the plot, its words below. */
export interface FrequencyMark {
  hz: number;
  words: string;
}

const LEFT = 46;
const RIGHT = 12;
const TOP = 26;
const TALL = 110;
const GAP = 34;
const BOTTOM = 26;
const HEIGHT = TOP + TALL + GAP + TALL + BOTTOM;
/** Beyond these a loop is of no interest, and would flatten the rest. */
const MOST_DB = 60;
const LEAST_DB = -40;

/**
 * A loop as two stacked plots on one logarithmic frequency axis: magnitude, dB, with the 0 dB line; phase, degrees,
 * with the −180° line. Pointer or arrow keys read the curves at one frequency.
 */
export function Bode({
  curves,
  loop = 'open loop',
  marks: frequencyMarks = [],
}: {
  curves: readonly BodeCurve[];
  loop?: 'open loop' | 'closed loop';
  marks?: readonly FrequencyMark[];
}) {
  const describedBy = useId();
  const { ref, width } = useChartWidth();
  const frequencies = curves[0]?.frequencyHz ?? [];
  const from = Math.log10(frequencies[0] ?? 0.1);
  const to = Math.log10(frequencies.at(-1) ?? 100);
  const x = (hz: number): number => LEFT + ((width - LEFT - RIGHT) * (Math.log10(hz) - from)) / (to - from);
  const { at, reading } = useReading({
    count: frequencies.length,
    start: Math.floor(frequencies.length / 2),
    nearest: (px) =>
      indexAt(frequencies, 10 ** (from + ((px - LEFT) * (to - from)) / (width - LEFT - RIGHT))),
  });
  const magnitudes = curves.flatMap(({ magnitudeDb }) => [...magnitudeDb]);
  const phases = curves.flatMap(({ phaseDeg }) => [...phaseDeg]);
  const magnitude = scaleOf(
    Math.max(LEAST_DB, Math.min(-10, ...magnitudes)),
    Math.min(MOST_DB, Math.max(10, ...magnitudes)),
    20,
    TOP,
  );
  const phase = scaleOf(Math.min(-180, ...phases), Math.max(-90, ...phases), 45, TOP + TALL + GAP);
  const inFrame = frequencyMarks.filter(({ hz: f }) => Math.log10(f) >= from && Math.log10(f) <= to);
  const hz = at === null ? null : frequencies[at]!;
  const valueAt = (curve: BodeCurve, frequency: number): string => {
    const i = indexAt(curve.frequencyHz, frequency);
    return `${number(curve.magnitudeDb[i], 1)} dB, ${number(curve.phaseDeg[i], 0)}°`;
  };
  return (
    <figure style={{ margin: 0 }} ref={ref}>
      <svg
        width={width}
        height={HEIGHT}
        role="img"
        aria-label={`${loop}, magnitude and phase over frequency, arrow keys to read`}
        aria-describedby={describedBy}
        {...reading}
        style={{ display: 'block', maxWidth: '100%', touchAction: 'pan-y' }}
      >
        <text x="0" y="13" fontSize="12.5" fill="var(--soft)">
          magnitude, dB
        </text>
        <text x="0" y={TOP + TALL + GAP - 13} fontSize="12.5" fill="var(--soft)">
          phase, °
        </text>
        {decades(from, to).map(({ value, major }) => (
          <g key={value}>
            <path
              d={`M${x(value)} ${TOP}v${TALL}m0 ${GAP}v${TALL}`}
              stroke="var(--rule)"
              strokeOpacity={major ? 1 : 0.45}
            />
            {major && (
              <text x={x(value)} y={HEIGHT - 8} fontSize="12" textAnchor="middle" fill="var(--soft)">
                {value}
              </text>
            )}
          </g>
        ))}
        <text x={width - RIGHT} y={HEIGHT - 8} fontSize="12" textAnchor="end" fill="var(--soft)">
          Hz
        </text>
        {[
          { ...magnitude, key: 0, of: ({ magnitudeDb }: BodeCurve) => magnitudeDb },
          { ...phase, key: -180, of: ({ phaseDeg }: BodeCurve) => phaseDeg },
        ].map(({ y, marks, key, of, top }) => (
          <g key={key}>
            {marks.map((mark) => (
              <g key={mark}>
                <path
                  d={`M${LEFT} ${y(mark)}H${width - RIGHT}`}
                  stroke={mark === key ? 'var(--soft)' : 'var(--rule)'}
                />
                <text x={LEFT - 6} y={y(mark) + 4} fontSize="12" textAnchor="end" fill="var(--soft)">
                  {String(mark).replace('-', '−')}
                </text>
              </g>
            ))}
            <clipPath id={`${describedBy}${key}`}>
              <rect x={LEFT} y={top} width={width - LEFT - RIGHT} height={TALL} />
            </clipPath>
            <g clipPath={`url(#${describedBy}${key})`}>
              {curves.map((curve) => (
                <path
                  key={curve.label}
                  d={curve.frequencyHz
                    .map((f, i) => `${i ? 'L' : 'M'}${x(f).toFixed(1)} ${y(of(curve)[i]!).toFixed(1)}`)
                    .join('')}
                  fill="none"
                  stroke="var(--ink)"
                  strokeWidth={curve.dashed ? 1.5 : 2}
                  {...(curve.dashed && { strokeDasharray: '5 4', strokeOpacity: 0.7 })}
                />
              ))}
            </g>
          </g>
        ))}
        {inFrame.map(({ hz: f }, i) => (
          <g key={i}>
            <path
              d={`M${x(f)} ${TOP}v${TALL}m0 ${GAP}v${TALL}`}
              stroke="var(--press)"
              strokeDasharray="1 3"
              strokeWidth="1.4"
            />
            <text x={x(f) + 4} y={TOP + 12 + 13 * (i % 3)} fontSize="12" fontWeight="600" fill="var(--press)">
              {letter(i)}
            </text>
          </g>
        ))}
        {hz !== null && <path d={`M${x(hz)} ${TOP}V${HEIGHT - BOTTOM}`} stroke="var(--press)" />}
      </svg>
      <figcaption id={describedBy} className="small soft" aria-live="polite" style={{ minHeight: 38 }}>
        {hz === null
          ? `${loop}, ${curves.map(({ label, dashed }) => `${label} ${dashed ? 'dashed' : 'solid'}`).join(', ')}`
          : `${significant(hz)} Hz: ${curves.map((curve) => `${curve.label} ${valueAt(curve, hz)}`).join('; ')}`}
      </figcaption>
      {inFrame.length > 0 && (
        <ul className="small" style={{ margin: '4px 0', paddingLeft: 0, listStyle: 'none' }}>
          {inFrame.map(({ hz: f, words }, i) => (
            <li key={i}>
              <b style={{ color: 'var(--press)' }}>{letter(i)}</b> {significant(f)} Hz: {words}
            </li>
          ))}
        </ul>
      )}
      <TableView
        columns={['Hz', ...curves.flatMap(({ label }) => [`${label}, dB`, `${label}, °`])]}
        rows={() =>
          frequencies.map((f) => [
            significant(f),
            ...curves.flatMap((curve) => {
              const i = indexAt(curve.frequencyHz, f);
              return [number(curve.magnitudeDb[i], 1), number(curve.phaseDeg[i], 1)];
            }),
          ])
        }
      />
    </figure>
  );
}

const letter = (i: number): string => String.fromCharCode(65 + i);

/** Index of the frequency nearest on a logarithmic scale. */
function indexAt(frequencies: readonly number[], hz: number): number {
  let nearest = 0;
  const off = (i: number): number => Math.abs(Math.log(frequencies[i]! / hz));
  for (let i = 1; i < frequencies.length; i++) if (off(i) < off(nearest)) nearest = i;
  return nearest;
}

function scaleOf(low: number, high: number, step: number, top: number) {
  const bottom = Math.floor(low / step) * step;
  const ceiling = Math.ceil(high / step) * step;
  const y = (v: number): number => top + (TALL * (ceiling - v)) / (ceiling - bottom);
  const every = step * Math.max(1, Math.ceil((ceiling - bottom) / step / 5));
  const first = Math.ceil(bottom / every);
  const marks = Array.from(
    { length: Math.floor(ceiling / every) - first + 1 },
    (_, i) => (first + i) * every,
  );
  return { y, marks, top };
}

function decades(from: number, to: number): { value: number; major: boolean }[] {
  const found: { value: number; major: boolean }[] = [];
  for (let decade = Math.floor(from); decade <= Math.ceil(to); decade++)
    for (let digit = 1; digit < 10; digit++) {
      const value = Number((digit * 10 ** decade).toPrecision(6));
      if (Math.log10(value) >= from && Math.log10(value) <= to) found.push({ value, major: digit === 1 });
    }
  return found;
}

const number = (value: number | undefined, digits: number): string =>
  value === undefined ? '–' : value.toFixed(digits).replace('-', '−');
