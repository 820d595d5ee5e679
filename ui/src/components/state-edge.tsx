import { STATE_COLOUR, type AxisState } from './states';

const RULE = <line x1="0" y1="8" x2="100" y2="8" stroke="var(--rule)" vectorEffect="non-scaling-stroke" />;

/**
 * The top edge of anything about an axis is its state: level, tilted, tilted and broken, dotted, or level between two
 * ticks. The parent is positioned and has no top border of its own.
 */
export function StateEdge({ state }: { state: AxisState }) {
  const colour = STATE_COLOUR[state];
  const line = (x1: number, y1: number, x2: number, y2: number, width: number, dash?: string) => (
    <line
      x1={x1}
      y1={y1}
      x2={x2}
      y2={y2}
      stroke={colour}
      strokeWidth={width}
      {...(dash && { strokeDasharray: dash })}
      vectorEffect="non-scaling-stroke"
    />
  );
  return (
    <svg
      viewBox="0 0 100 16"
      preserveAspectRatio="none"
      aria-hidden
      style={{
        position: 'absolute',
        left: -1,
        top: -8,
        width: 'calc(100% + 2px)',
        height: 16,
        overflow: 'visible',
      }}
    >
      {state === 'in-tune' && line(0, 8, 100, 8, 1.6)}
      {state === 'drifting' && (
        <>
          {RULE}
          {line(0, 3, 100, 11, 3)}
        </>
      )}
      {state === 'out-of-tune' && (
        <>
          {RULE}
          {line(0, 0, 57, 8.5, 4)}
          {line(61, 14, 100, 8, 4)}
        </>
      )}
      {state === 'no-signal' && line(0, 8, 100, 8, 2.4, '2 6')}
      {state === 'in-maintenance' && (
        <>
          {line(0, 8, 100, 8, 2.4)}
          {line(0.3, 2, 0.3, 14, 3)}
          {line(99.7, 2, 99.7, 14, 3)}
        </>
      )}
    </svg>
  );
}
