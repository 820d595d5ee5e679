import { STATE_COLOUR, STATE_WORDS, type AxisState } from './states';

const PATHS: Record<AxisState, { d: string; width: number; dash?: string }> = {
  'in-tune': { d: 'M1 7H17', width: 2 },
  drifting: { d: 'M1 4L17 10', width: 2.6 },
  'out-of-tune': { d: 'M1 2L9.5 7.5M11 11.5L17 8', width: 2.6 },
  'no-signal': { d: 'M1 7H17', width: 2.4, dash: '2 2.6' },
  'in-maintenance': { d: 'M2 7H16M2 2V12M16 2V12', width: 2.2 },
};

/** The edge of a state, small: for tables, counts and tabs. Always beside the word, so hidden from readers. */
export function StateGlyph({ state, size = 18 }: { state: AxisState; size?: number }) {
  const { d, width, dash } = PATHS[state];
  return (
    <svg
      width={size}
      height={(size * 14) / 18}
      viewBox="0 0 18 14"
      aria-hidden
      style={{ verticalAlign: '-2px', flex: 'none' }}
    >
      <path
        d={d}
        stroke={STATE_COLOUR[state]}
        strokeWidth={width}
        fill="none"
        {...(dash && { strokeDasharray: dash })}
      />
    </svg>
  );
}

export function StateWord({ state }: { state: AxisState }) {
  return (
    <span style={{ color: STATE_COLOUR[state], fontWeight: 600, whiteSpace: 'nowrap' }}>
      <StateGlyph state={state} /> {STATE_WORDS[state]}
    </span>
  );
}
