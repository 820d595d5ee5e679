import { useId } from 'react';
import { STATE_COLOUR, type AxisState } from '../components/states';

export interface DriftPoint {
  gainRatio: number;
  poleRatio: number;
}

/** χ² with two degrees of freedom at 95 %. */
const CHI_SQUARE_95 = 5.991;

/**
 * K/K₀ across, α/α₀ up, both logarithmic from a half to double. Tolerance box, 95 % ellipse of the estimate, faint
 * trail. Beyond the frame the mark rests on the rim and points outward. A hollow mark is a guess: its 95 % interval is
 * wider than from a half to double.
 */
export function DriftPlot({
  state,
  point,
  covariance,
  trail = [],
  tolerances,
  size = 72,
}: {
  state: AxisState;
  point: DriftPoint | null;
  covariance?: { gain: number; cross: number; pole: number };
  trail?: readonly DriftPoint[];
  tolerances: { gainPct: number; polePct: number };
  size?: number;
}) {
  const frame = useId();
  const x = (ratio: number): number => size / 2 + Math.log2(ratio) * size * 0.5;
  const y = (ratio: number): number => size / 2 - Math.log2(ratio) * size * 0.5;
  const inside = (value: number): number => Math.min(size - 3, Math.max(3, value));
  const colour = STATE_COLOUR[state];
  const k = tolerances.gainPct / 100;
  const a = tolerances.polePct / 100;
  const box = { left: x(1 - k), right: x(1 + k), top: y(1 + a), bottom: y(1 - a) };
  const px = point ? x(point.gainRatio) : 0;
  const py = point ? y(point.poleRatio) : 0;
  const beyond = point !== null && (px < 3 || py < 3 || px > size - 3 || py > size - 3);
  const guess =
    covariance !== undefined &&
    Math.sqrt(CHI_SQUARE_95 * Math.max(covariance.gain, covariance.pole)) > Math.LN2;
  const path = [...trail, ...(point ? [point] : [])]
    .map(
      ({ gainRatio, poleRatio }, i) =>
        `${i ? 'L' : 'M'}${x(gainRatio).toFixed(1)} ${y(poleRatio).toFixed(1)}`,
    )
    .join('');
  return (
    <svg
      width={size}
      height={size}
      viewBox={`0 0 ${size} ${size}`}
      style={{ flex: 'none' }}
      role="img"
      aria-label={label(point, guess)}
    >
      <clipPath id={frame}>
        <rect width={size} height={size} />
      </clipPath>
      <rect x=".5" y=".5" width={size - 1} height={size - 1} fill="var(--surface)" stroke="var(--rule)" />
      <path d={`M${size / 2} 0V${size}M0 ${size / 2}H${size}`} stroke="var(--rule)" strokeWidth=".8" />
      <rect
        x={box.left}
        y={box.top}
        width={box.right - box.left}
        height={box.bottom - box.top}
        fill="none"
        stroke="var(--soft)"
      />
      <g clipPath={`url(#${frame})`}>
        {path && <path d={path} fill="none" stroke={colour} strokeOpacity=".35" strokeWidth="1.2" />}
        {point && covariance && (
          <Ellipse x={px} y={py} covariance={covariance} scale={(size * 0.5) / Math.LN2} colour={colour} />
        )}
      </g>
      {point && (
        <g
          {...(guess
            ? { fill: 'var(--surface)', stroke: colour, strokeWidth: 1.3 }
            : { fill: colour, stroke: 'none' })}
        >
          {beyond ? (
            <path
              d="M-5 -4L4 0L-5 4Z"
              transform={`translate(${inside(px)} ${inside(py)}) rotate(${(Math.atan2(py - size / 2, px - size / 2) * 180) / Math.PI})`}
            />
          ) : (
            <circle cx={px} cy={py} r={Math.max(guess ? 2.4 : 1.6, size / 45)} />
          )}
        </g>
      )}
    </svg>
  );
}

/** x'ᵀ Σ⁻¹ x' = χ²: half axes √(χ²·eigenvalue) of the covariance of (ln K, ln α), turned to its eigenvectors. */
function Ellipse({
  x,
  y,
  covariance: { gain, cross, pole },
  scale,
  colour,
}: {
  x: number;
  y: number;
  covariance: { gain: number; cross: number; pole: number };
  scale: number;
  colour: string;
}) {
  const mean = (gain + pole) / 2;
  const spread = Math.hypot((gain - pole) / 2, cross);
  const long = Math.sqrt(CHI_SQUARE_95 * Math.max(0, mean + spread)) * scale;
  const short = Math.sqrt(CHI_SQUARE_95 * Math.max(0, mean - spread)) * scale;
  const angle = (0.5 * Math.atan2(2 * cross, gain - pole) * 180) / Math.PI;
  return (
    <ellipse
      cx={x}
      cy={y}
      rx={Math.max(1, long)}
      ry={Math.max(1, short)}
      transform={`rotate(${-angle} ${x} ${y})`}
      fill={colour}
      fillOpacity=".22"
      stroke={colour}
      strokeWidth="1.2"
    />
  );
}

function label(point: DriftPoint | null, guess: boolean): string {
  if (!point) return 'Drift plot: nothing known yet';
  const pct = (ratio: number): string =>
    `${ratio < 1 ? 'minus' : 'plus'} ${Math.abs((ratio - 1) * 100).toFixed(0)} %`;
  return `Drift plot: gain ${pct(point.gainRatio)}, pole ${pct(point.poleRatio)} against baseline${guess ? ', but hardly known' : ''}`;
}
