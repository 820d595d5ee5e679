import type { StripPoint } from '../api/live';

/** Seconds that a strip shows. */
const SPAN = 120;
const WIDTH = 240;

interface StripProps {
  points: readonly StripPoint[];
  colour: string;
  height?: number;
}

/** x of a second: the newest one at the right edge. */
const place = (t: number, newest: number): number => WIDTH - ((newest - t + 1) * WIDTH) / SPAN;

/** Following error of the last two minutes as a band against its tolerance (dashed); a missing second is a hole. */
export function ErrorStrip({ points, colour, tolerance, height = 22 }: StripProps & { tolerance: number }) {
  const middle = height / 2;
  const reach = height * 0.36;
  const newest = points.at(-1)?.[0] ?? 0;
  const step = WIDTH / SPAN;
  let d = '';
  for (const [t, error] of points) {
    const x = place(t, newest);
    if (x < 0) continue;
    const half = Math.max(0.4, Math.min(middle, (error / tolerance) * reach));
    d += `M${x.toFixed(1)} ${(middle - half).toFixed(1)}h${step.toFixed(2)}V${(middle + half).toFixed(1)}h${(-step).toFixed(2)}Z`;
  }
  return (
    <svg
      width="100%"
      height={height}
      viewBox={`0 0 ${WIDTH} ${height}`}
      preserveAspectRatio="none"
      aria-hidden
    >
      <path d={d} fill={colour} fillOpacity=".75" />
      <path
        d={`M0 ${middle - reach}H${WIDTH}M0 ${middle + reach}H${WIDTH}`}
        stroke="var(--soft)"
        strokeWidth=".8"
        strokeDasharray="3 3"
        vectorEffect="non-scaling-stroke"
      />
    </svg>
  );
}

/** Peak output of each second; the share of moving time at the limit filled. */
export function OutputStrip({ points, colour, height = 20 }: StripProps) {
  const newest = points.at(-1)?.[0] ?? 0;
  const step = WIDTH / SPAN;
  let peaks = '';
  let saturated = '';
  for (const [t, , output, atLimit] of points) {
    const x = place(t, newest);
    if (x < 0) continue;
    const bar = (share: number): string => {
      const tall = Math.min(1, share) * height;
      return `M${x.toFixed(1)} ${height}v${(-tall).toFixed(1)}h${(step * 0.8).toFixed(2)}v${tall.toFixed(1)}Z`;
    };
    peaks += bar(output / 100);
    if (atLimit > 0) saturated += bar(Math.max(0.12, atLimit / 100));
  }
  return (
    <svg
      width="100%"
      height={height}
      viewBox={`0 0 ${WIDTH} ${height}`}
      preserveAspectRatio="none"
      aria-hidden
    >
      <path d={peaks} fill="var(--soft)" fillOpacity=".32" />
      <path d={saturated} fill={colour} />
      <path d={`M0 ${height - 0.5}H${WIDTH}`} stroke="var(--rule)" vectorEffect="non-scaling-stroke" />
    </svg>
  );
}
