import { useEffect, useRef } from 'react';
import uPlot from 'uplot';
import 'uplot/dist/uPlot.min.css';
import type { LiveTrace } from '../api/live';

/** Seconds that the trace shows, and points kept for them. */
const SPAN = 20;
const MOST_POINTS = 6_000;

const css = (name: string): string =>
  getComputedStyle(document.documentElement).getPropertyValue(name).trim();
const FONT = "12px 'Work Sans Variable', sans-serif";

type Rows = [time: number[], target: number[], position: number[], error: number[], output: number[]];

/** Position with its target, following error and output of one axis, as they arrive. */
export class TraceStore {
  rows: Rows = [[], [], [], [], []];
  private readonly listeners = new Set<() => void>();

  push({ time, target, position, output }: LiveTrace): void {
    const [t, r, y, e, u] = this.rows;
    for (let i = 0; i < time.length; i++) {
      t.push(time[i]!);
      r.push(target[i]!);
      y.push(position[i]!);
      e.push(target[i]! - position[i]!);
      u.push(output[i]!);
    }
    const drop = Math.max(
      t.length - MOST_POINTS,
      t.findIndex((at) => at > t.at(-1)! - SPAN),
    );
    if (drop > 0) for (const row of this.rows) row.splice(0, drop);
    for (const listener of this.listeners) listener();
  }

  listen(listener: () => void): () => void {
    this.listeners.add(listener);
    return () => void this.listeners.delete(listener);
  }
}

export function LiveTraceChart({ store, timeZone }: { store: TraceStore; timeZone: string }) {
  return (
    <div style={{ display: 'grid', gap: 4 }}>
      <Plot
        store={store}
        timeZone={timeZone}
        label="position, mm"
        rows={[1, 2]}
        names={['target', 'position']}
        height={170}
      />
      <Plot
        store={store}
        timeZone={timeZone}
        label="following error, mm"
        rows={[3]}
        names={['error']}
        height={120}
      />
      <Plot store={store} timeZone={timeZone} label="output, %" rows={[4]} names={['output']} height={120} />
    </div>
  );
}

function Plot({
  store,
  timeZone,
  label,
  rows,
  names,
  height,
}: {
  store: TraceStore;
  timeZone: string;
  label: string;
  rows: number[];
  names: string[];
  height: number;
}) {
  const holder = useRef<HTMLDivElement>(null);
  // Compared by content: the arrays are written anew at each render.
  const rowKey = rows.join();
  const nameKey = names.join();
  useEffect(() => {
    const element = holder.current!;
    const shown = rowKey.split(',').map(Number);
    const shownNames = nameKey.split(',');
    const axis = {
      stroke: css('--soft'),
      font: FONT,
      grid: { stroke: css('--rule'), width: 0.6 },
      ticks: { stroke: css('--rule') },
    };
    const clock = (at: number): string => new Date(at * 1000).toLocaleTimeString('en-GB', { timeZone });
    const plot = new uPlot(
      {
        width: element.clientWidth,
        height,
        padding: [8, 8, 0, 0],
        legend: { show: true, live: true },
        cursor: { drag: { x: false, y: false } },
        tzDate: (at) => uPlot.tzDate(new Date(at * 1000), timeZone),
        axes: [
          { ...axis, values: (_, ticks) => ticks.map(clock) },
          { ...axis, size: 62, space: 26 },
        ],
        scales: { x: { range: (_, __, max) => [max - SPAN, max] } },
        series: [
          { label: 'time', value: (_, at) => (at == null ? '–' : clock(at)) },
          ...shown.map((row, i) => ({
            label: shownNames[i]!,
            stroke: css('--ink'),
            width: row === 1 ? 1 : 1.4,
            ...(row === 1 && { dash: [5, 4] }),
            value: (_: uPlot, v: number | null) => (v == null ? '–' : v.toFixed(row === 3 ? 4 : 2)),
          })),
        ],
      },
      [store.rows[0], ...shown.map((row) => store.rows[row]!)] as uPlot.AlignedData,
      element,
    );
    const stop = store.listen(() =>
      plot.setData([store.rows[0], ...shown.map((row) => store.rows[row]!)] as uPlot.AlignedData),
    );
    const resize = new ResizeObserver(() => plot.setSize({ width: element.clientWidth, height }));
    resize.observe(element);
    return () => {
      stop();
      resize.disconnect();
      plot.destroy();
    };
  }, [store, timeZone, rowKey, nameKey, height]);
  return (
    <div>
      <div className="soft" style={{ fontSize: 12.5 }}>
        {label}
      </div>
      <div ref={holder} role="img" aria-label={`Live ${label}`} />
    </div>
  );
}
