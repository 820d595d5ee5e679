import { roundMarks, TableView, useChartWidth } from './chart-frame';

export interface PoleSet {
  label: string;
  poles: readonly { re: number; im: number }[];
  /** Drawn as circles. */
  zeros?: readonly { re: number; im: number }[];
  /** Drawn as a plus instead of a cross. */
  plus?: boolean;
  /** Before faint, after solid. */
  faint?: boolean;
}

const HEIGHT = 240;
const WIDEST = 460;
const RIGHT = 44;
/** Room left of the leftmost pole for its label, px. */
const LEFT = 56;

/**
 * Closed-loop poles in the s-plane, rad/s, equal scales on both axes: the dashed rays are 45° (a damping ratio of
 * 0.707). Equal poles are drawn once with their number.
 */
export function PoleMap({ sets }: { sets: readonly PoleSet[] }) {
  const { ref, width: room } = useChartWidth();
  const width = Math.min(WIDEST, room);
  const all = sets.flatMap(({ poles, zeros = [] }) => [...poles, ...zeros]);
  const leftmost = Math.max(1e-6, ...all.map(({ re }) => -re));
  const highest = Math.max(1e-9, ...all.map(({ im }) => Math.abs(im)));
  const rightmost = Math.max(0, ...all.map(({ re }) => re));
  const scale = Math.min((width - LEFT - RIGHT) / (leftmost + rightmost), (HEIGHT / 2 - 26) / highest);
  const zero = width - RIGHT - rightmost * scale;
  const x = (re: number): number => zero + re * scale;
  const y = (im: number): number => HEIGHT / 2 - im * scale;
  const reach = (zero - 8) / scale;
  const tall = (HEIGHT / 2 - 14) / scale;
  const ray = Math.min(reach, tall);
  const realMarks = roundMarks(-reach, (width - 20 - zero) / scale, width / 90).filter((mark) => mark !== 0);
  // The top is the axis's name's.
  const imaginaryMarks = roundMarks(-tall, tall, 4).filter((mark) => mark !== 0 && y(mark) > 32);
  return (
    <figure style={{ margin: 0 }} ref={ref}>
      <svg
        width={width}
        height={HEIGHT}
        role="img"
        aria-label={sets.map(wordsOf).join('; ')}
        style={{ display: 'block', maxWidth: '100%' }}
      >
        <path d={`M8 ${HEIGHT / 2}H${width - 8}M${zero} 8V${HEIGHT - 8}`} stroke="var(--rule)" />
        <path
          d={`M${zero} ${HEIGHT / 2}L${x(-ray)} ${y(ray)}M${zero} ${HEIGHT / 2}L${x(-ray)} ${y(-ray)}`}
          stroke="var(--rule)"
          strokeDasharray="3 4"
        />
        <text x={zero + 6} y="16" fontSize="12" fill="var(--soft)">
          Im
        </text>
        <text x={width - 8} y={HEIGHT / 2 - 6} fontSize="12" textAnchor="end" fill="var(--soft)">
          Re
        </text>
        {realMarks.map((mark) => (
          <text
            key={mark}
            x={x(mark)}
            y={HEIGHT / 2 + 18}
            fontSize="12"
            textAnchor="middle"
            fill="var(--soft)"
          >
            {signed(mark)}
          </text>
        ))}
        {imaginaryMarks.map((mark) => (
          <text key={mark} x={zero + 6} y={y(mark) + 4} fontSize="12" fill="var(--soft)">
            {signed(mark)}
          </text>
        ))}
        {sets.map(({ label, poles, faint, plus }) =>
          distinct(poles, reach).map(({ re, im, times }, i) => (
            <g key={`${label} ${i}`}>
              <path
                d={
                  plus ? `M${x(re) - 6} ${y(im)}h12m-6-6v12` : `M${x(re) - 5} ${y(im) - 5}l10 10m0-10l-10 10`
                }
                stroke={faint ? 'var(--soft)' : 'var(--ink)'}
                strokeWidth={faint ? 1.6 : 2.2}
              />
              {times > 1 && (
                <text
                  x={x(re)}
                  y={y(im) + (faint ? -10 : -24)}
                  fontSize="12"
                  textAnchor="middle"
                  fill={faint ? 'var(--soft)' : 'var(--ink)'}
                >
                  {times} {label}
                </text>
              )}
            </g>
          )),
        )}
        {sets.map(({ label, zeros = [], faint }) =>
          distinct(zeros, reach).map(({ re, im }) => (
            <circle
              key={`${label} zero ${re} ${im}`}
              cx={x(re)}
              cy={y(im)}
              r="5"
              fill="none"
              stroke={faint ? 'var(--soft)' : 'var(--ink)'}
              strokeWidth={faint ? 1.4 : 1.8}
            />
          )),
        )}
      </svg>
      <figcaption className="small soft">
        {sets.map(signOf).join(', ')}
        {sets.some(({ zeros }) => zeros?.length) && ', zeros as circles'}; rad/s, equal scales
      </figcaption>
      <TableView
        columns={['poles and zeros', 'real, rad/s', 'imaginary, rad/s']}
        rows={() =>
          sets.flatMap(({ label, poles, zeros = [] }) =>
            [
              ...poles.map((pole) => ({ name: label, ...pole })),
              ...zeros.map((zero) => ({ name: `${label}, zero`, ...zero })),
            ].map(({ name, re, im }) => [
              name,
              signed(Number(re.toPrecision(4))),
              signed(Number(im.toPrecision(4))),
            ]),
          )
        }
      />
    </figure>
  );
}

const signed = (value: number): string => String(value).replace('-', '−');

/** Poles nearer to each other than a hundredth of the frame, as one. */
function distinct(poles: PoleSet['poles'], reach: number): { re: number; im: number; times: number }[] {
  const found: { re: number; im: number; times: number }[] = [];
  for (const { re, im } of poles) {
    const same = found.find((other) => Math.hypot(other.re - re, other.im - im) < reach / 100);
    if (same) same.times++;
    else found.push({ re, im, times: 1 });
  }
  return found;
}

const wordsOf = ({ label, poles }: PoleSet): string =>
  `${label}: ${poles.map(({ re, im }) => `${re.toFixed(1)}${Math.abs(im) > 1e-6 ? ` ${im < 0 ? '−' : '+'} ${Math.abs(im).toFixed(1)}j` : ''}`).join(', ')} rad/s`;

const signOf = ({ label, faint, plus }: PoleSet): string =>
  `${label} ${plus ? 'as plus signs' : faint ? 'thin' : 'heavy'}`;
