export interface PoleSet {
  label: string;
  poles: readonly { re: number; im: number }[];
  /** Before faint, after solid. */
  faint?: boolean;
}

const WIDTH = 320;
const HEIGHT = 220;

/** Closed-loop poles in the s-plane, rad/s, equal scales on both axes. Equal poles are drawn once with their number. */
export function PoleMap({ sets }: { sets: readonly PoleSet[] }) {
  const all = sets.flatMap(({ poles }) => poles);
  const reach = 1.25 * Math.max(1e-6, ...all.map(({ re, im }) => Math.max(Math.abs(re), 1.4 * Math.abs(im))));
  const scale = (WIDTH - 60) / reach;
  const x = (re: number): number => WIDTH - 36 + re * scale;
  const y = (im: number): number => HEIGHT / 2 - im * scale;
  const step = [1, 2, 5, 10]
    .map((m) => m * 10 ** Math.floor(Math.log10(reach / 4)))
    .find((s) => reach / s <= 5)!;
  const marks = Array.from({ length: Math.floor(reach / step) }, (_, i) => -(i + 1) * step);
  return (
    <figure style={{ margin: 0 }}>
      <svg
        width="100%"
        viewBox={`0 0 ${WIDTH} ${HEIGHT}`}
        role="img"
        aria-label={sets.map(wordsOf).join('; ')}
        style={{ maxWidth: 420 }}
      >
        <path d={`M8 ${HEIGHT / 2}H${WIDTH - 8}M${x(0)} 8V${HEIGHT - 8}`} stroke="var(--rule)" />
        {marks.map((mark) => (
          <text
            key={mark}
            x={x(mark)}
            y={HEIGHT / 2 + 16}
            fontSize="12"
            textAnchor="middle"
            fill="var(--soft)"
          >
            {String(Number(mark.toPrecision(3))).replace('-', '−')}
          </text>
        ))}
        {sets.map(({ label, poles, faint }) =>
          distinct(poles, reach).map(({ re, im, times }, i) => (
            <g key={`${label} ${i}`}>
              <path
                d={`M${x(re) - 5} ${y(im) - 5}l10 10m0-10l-10 10`}
                stroke={faint ? 'var(--soft)' : 'var(--ink)'}
                strokeWidth={faint ? 1.6 : 2.2}
              />
              {times > 1 && (
                <text
                  x={x(re)}
                  y={y(im) - 10}
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
      </svg>
      <figcaption className="small soft">
        {sets.map(({ label, faint }) => `${label} ${faint ? 'grey' : 'black'}`).join(', ')}; rad/s, equal
        scales
      </figcaption>
    </figure>
  );
}

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
