import { Button, useComputedColorScheme } from '@mantine/core';
import { useEffect, useRef, useState, type KeyboardEvent } from 'react';
import uPlot from 'uplot';
import 'uplot/dist/uPlot.min.css';
import { TableView } from './chart-frame';
import { SPAN, type TraceRows, type TraceStore } from './trace-store';

const FONT = "12px 'Work Sans Variable', sans-serif";
const TIME_AXIS = 24;
/** Rows of the table view. */
const TABLE_ROWS = 100;

const PANELS = [
  { label: 'position, mm (target dashed)', rows: [1, 2], height: 150 },
  { label: 'following error, mm', rows: [3], height: 96 },
  { label: 'output, %', rows: [4], height: 96 + TIME_AXIS },
] as const;

const css = (name: string): string =>
  getComputedStyle(document.documentElement).getPropertyValue(name).trim();

/** The output's scale in a few fixed steps, so that it says how much is left without trembling. */
const outputRange = (low: number, high: number): [number, number] => {
  const largest = Math.max(Math.abs(low), Math.abs(high));
  const bound = [10, 25, 50].find((step) => largest <= step) ?? 105;
  return [-bound, bound];
};

/**
 * The last seconds of one axis in three stacked plots on one time axis. It can be held to be read: by its button, or by
 * the arrow keys, which then move the reading line.
 */
export function LiveTraceChart({ store, timeZone }: { store: TraceStore; timeZone: string }) {
  const scheme = useComputedColorScheme();
  const holders = useRef<HTMLDivElement>(null);
  const plots = useRef<uPlot[]>([]);
  const [held, setHeld] = useState<TraceRows | null>(null);
  const [at, setAt] = useState<number | null>(null);
  const [empty, setEmpty] = useState(() => store.rows[0].length === 0);

  useEffect(() => {
    const elements = [...holders.current!.querySelectorAll<HTMLDivElement>('[data-panel]')];
    const made = PANELS.map((_, i) => plotOf(i, elements[i]!, timeZone, setAt));
    plots.current = made;
    const resize = new ResizeObserver(() =>
      made.forEach((plot, i) => plot.setSize({ width: elements[i]!.clientWidth, height: PANELS[i]!.height })),
    );
    resize.observe(holders.current!);
    return () => {
      resize.disconnect();
      for (const plot of made) plot.destroy();
      plots.current = [];
    };
    // Colours are read from the scheme when the plots are made.
  }, [timeZone, scheme]);

  useEffect(() => {
    const show = (rows: TraceRows): void => {
      setEmpty(rows[0].length === 0);
      plots.current.forEach((plot, i) =>
        plot.setData([rows[0], ...PANELS[i]!.rows.map((row) => rows[row])] as uPlot.AlignedData),
      );
    };
    show(held ?? store.rows);
    return held ? undefined : store.listen(() => show(store.rows));
  }, [store, held, timeZone, scheme]);

  const rows = held ?? store.rows;
  const read = (index: number): void => {
    const [first] = plots.current;
    const time = rows[0][index];
    if (!first || time === undefined) return;
    for (const plot of plots.current) plot.setCursor({ left: plot.valToPos(time, 'x'), top: 10 });
    setAt(index);
  };
  const onKeyDown = (event: KeyboardEvent): void => {
    if (event.target !== event.currentTarget) return;
    const step = { ArrowLeft: -1, ArrowRight: 1, PageDown: -25, PageUp: 25 }[event.key];
    if (event.key === 'Escape') {
      setHeld(null);
      setAt(null);
    }
    if (step === undefined) return;
    event.preventDefault();
    if (!held) setHeld(store.held());
    const last = rows[0].length - 1;
    read(Math.min(last, Math.max(0, (at ?? last) + step)));
  };
  const clock = (time: number): string =>
    `${new Date(time * 1000).toLocaleTimeString('en-GB', { timeZone })}.${String(Math.floor((time % 1) * 1000)).padStart(3, '0')}`;
  const words = (index: number): string[] => [
    clock(rows[0][index]!),
    ...([3, 3, 4, 1] as const).map((digits, i) =>
      rows[(i + 1) as 1 | 2 | 3 | 4][index]!.toFixed(digits).replace('-', '−'),
    ),
  ];
  const reading = at !== null && at < rows[0].length ? words(at) : null;
  return (
    <figure style={{ margin: 0, position: 'relative' }}>
      <div
        ref={holders}
        role="group"
        tabIndex={0}
        aria-label="Live trace, arrow keys hold and read it"
        onKeyDown={onKeyDown}
      >
        {PANELS.map(({ label, height }) => (
          <div key={label}>
            <div className="soft" style={{ fontSize: 12.5 }}>
              {label}
            </div>
            <div data-panel style={{ height }} />
          </div>
        ))}
      </div>
      {empty && (
        <p className="soft" style={{ position: 'absolute', top: 60, left: 76, margin: 0 }}>
          Waiting for samples …
        </p>
      )}
      <div
        style={{
          display: 'flex',
          gap: 12,
          alignItems: 'center',
          justifyContent: 'space-between',
          marginTop: 8,
        }}
        className="no-print"
      >
        <figcaption
          className="small soft"
          style={{ minHeight: 38, flex: 1 }}
          aria-live={held ? 'polite' : 'off'}
        >
          {reading
            ? `${reading[0]}: target ${reading[1]} mm, position ${reading[2]} mm, error ${reading[3]} mm, output ${reading[4]} %`
            : held
              ? 'held; more arrives meanwhile'
              : 'point at it, or hold it and use the arrow keys'}
        </figcaption>
        <Button
          size="xs"
          variant="default"
          aria-pressed={held !== null}
          onClick={() => setHeld(held ? null : store.held())}
        >
          {held ? 'Go on' : 'Hold'}
        </Button>
      </div>
      <TableView
        columns={['at', 'target, mm', 'position, mm', 'error, mm', 'output, %']}
        rows={() => {
          const every = Math.max(1, Math.floor(rows[0].length / TABLE_ROWS));
          const found: string[][] = [];
          for (let i = rows[0].length - 1; i >= 0; i -= every) found.push(words(i));
          return found;
        }}
      />
    </figure>
  );
}

function plotOf(
  panel: number,
  element: HTMLDivElement,
  timeZone: string,
  onRead: (index: number | null) => void,
): uPlot {
  const { rows, height } = PANELS[panel]!;
  const last = panel === PANELS.length - 1;
  const axis = {
    stroke: css('--soft'),
    font: FONT,
    grid: { stroke: css('--rule'), width: 0.6 },
    ticks: { stroke: css('--rule') },
  };
  const clock = (at: number): string => new Date(at * 1000).toLocaleTimeString('en-GB', { timeZone });
  return new uPlot(
    {
      width: element.clientWidth,
      height,
      padding: [8, 26, 0, 0],
      legend: { show: false },
      cursor: { drag: { x: false, y: false }, y: false, sync: { key: 'live-trace' }, points: { size: 6 } },
      tzDate: (at) => uPlot.tzDate(new Date(at * 1000), timeZone),
      axes: [
        {
          ...axis,
          space: 84,
          size: last ? TIME_AXIS + 4 : 6,
          values: last ? (_, ticks) => ticks.map(clock) : (_, ticks) => ticks.map(() => ''),
        },
        { ...axis, size: 62, space: 24 },
      ],
      scales: {
        x: { range: (_, __, max) => [max - SPAN, max] },
        ...(last && { y: { range: (_: uPlot, low: number, high: number) => outputRange(low, high) } }),
      },
      series: [
        {},
        ...rows.map((row) => ({
          stroke: css('--ink'),
          width: row === 1 ? 1 : 1.4,
          ...(row === 1 && { dash: [5, 4] }),
        })),
      ],
      hooks: { setCursor: [(plot) => onRead(plot.cursor.idx ?? null)] },
    },
    [[], ...rows.map(() => [])],
    element,
  );
}
