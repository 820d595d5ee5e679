import { useElementSize } from '@mantine/hooks';
import type { Schemas } from '../api/client';

type Binding = Schemas['BindingDto'];

export const LIMIT_WORDS: Record<Binding['limits'][number]['name'], string> = {
  'output-headroom': 'output headroom',
  'output-ripple': 'output ripple',
  'sampled-damping': 'sampling',
  sensitivity: 'sensitivity Ms',
  'following-error': 'following error',
};

/** Assumed until the page is laid out, px. */
const USUAL_WIDTH = 640;
/** Room left of and right of the ruler, px. */
export const MARGIN = 24;
/** Labels closer than this, px, move to another row. */
const LEAST_GAP = 118;

/** What binds: one logarithmic bar, the allowed interval filled, each limit a named tick, the chosen λ a mark. */
export function LambdaRuler({
  binding,
  range,
}: {
  binding: Binding;
  /** Ends of the ruler, rad/s; around what there is to show where not given. */
  range?: { from: number; to: number };
}) {
  const { allowed, limits, lambda, commissionedLambda, upper, lower, kept } = binding;
  const { ref, width: measured } = useElementSize();
  const width = measured || USUAL_WIDTH;
  const bounds = limits.flatMap(({ lambda: at }) => (at === null ? [] : [at]));
  const all = [commissionedLambda, ...(lambda ? [lambda] : []), ...bounds];
  const { from, to } = range ?? { from: Math.min(...all) / 1.5, to: Math.max(...all) * 1.5 };
  const x = (v: number): number => MARGIN + ((width - 2 * MARGIN) * Math.log(v / from)) / Math.log(to / from);
  const rows: number[] = [];
  const ticks = limits
    .flatMap(({ name, lambda: at }) => (at === null || at < from || at > to ? [] : [{ name, at }]))
    .sort((a, b) => a.at - b.at)
    .map(({ name, at }) => {
      let row = rows.findIndex((last) => x(at) - last >= LEAST_GAP);
      if (row < 0) row = rows.length;
      rows[row] = x(at);
      return { name, at, row, binds: name === upper?.name || name === lower?.name };
    });
  const top = 20 + rows.length * 17;
  const height = top + 74;
  const marks = [1, 2, 5]
    .flatMap((m) => [0.1, 1, 10, 100].map((s) => m * s))
    .filter((v) => v > from && v < to)
    .sort((a, b) => a - b)
    .reduce<number[]>((kept, v) => (kept.length && x(v) - x(kept.at(-1)!) < 28 ? kept : [...kept, v]), []);
  return (
    <figure style={{ margin: 0 }} ref={ref}>
      <svg
        width={width}
        height={height}
        role="img"
        aria-label={rulerText(binding)}
        style={{ display: 'block', maxWidth: '100%' }}
      >
        <path d={`M${MARGIN} ${top}H${width - MARGIN}`} stroke="var(--rule)" strokeWidth="9" />
        {allowed && (
          <path
            d={`M${x(Math.max(from, allowed.low))} ${top}H${x(Math.min(to, allowed.high))}`}
            stroke="var(--press)"
            strokeOpacity=".4"
            strokeWidth="9"
          />
        )}
        {ticks.map(({ name, at, row, binds }) => {
          const y = top - 16 - row * 17;
          const anchor = x(at) < 90 ? 'start' : x(at) > width - 90 ? 'end' : 'middle';
          return (
            <g key={name} fill={binds ? 'var(--ink)' : 'var(--soft)'} stroke="none">
              <path
                d={`M${x(at)} ${y + 4}V${top + 4}`}
                stroke={binds ? 'var(--ink)' : 'var(--soft)'}
                strokeWidth="1.4"
              />
              <text x={x(at)} y={y} fontSize="12" textAnchor={anchor} fontWeight={binds ? 600 : 400}>
                {LIMIT_WORDS[name]}
                {binds && ' binds'}
              </text>
            </g>
          );
        })}
        {lambda !== null && (
          <>
            <path d={`M${x(lambda)} ${top - 12}V${top + 12}`} stroke="var(--ink)" strokeWidth="3" />
            <text
              x={x(lambda)}
              y={top + 30}
              fontSize="12.5"
              fontWeight="600"
              textAnchor="middle"
              fill="var(--ink)"
            >
              {kept ? 'kept at ' : ''}
              {lambda.toFixed(1)}
            </text>
          </>
        )}
        {marks.map((v) => (
          <text key={v} x={x(v)} y={height - 20} fontSize="12" textAnchor="middle" fill="var(--soft)">
            {v}
          </text>
        ))}
        <text x={width / 2} y={height - 4} fontSize="12" textAnchor="middle" fill="var(--soft)">
          λ, rad/s
        </text>
      </svg>
    </figure>
  );
}

/** The ruler in words. */
export function rulerText({ allowed, lambda, kept, reason }: Binding): string {
  if (!allowed) return `No λ is allowed. ${reason}`;
  return `λ may go from ${allowed.low.toFixed(1)} to ${allowed.high.toFixed(1)} rad/s; ${lambda === null ? reason : kept ? `the commissioned ${lambda.toFixed(1)} is kept` : `${lambda.toFixed(1)} is proposed`}`;
}
