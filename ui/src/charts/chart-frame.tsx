import { useElementSize } from '@mantine/hooks';
import { useState, type KeyboardEvent, type PointerEvent, type RefCallback } from 'react';

/** Assumed until the page is laid out, px. */
const USUAL_WIDTH = 640;

/** Width of the element that holds a chart, px: charts are drawn at it, so that their text is never scaled. */
export function useChartWidth(): { ref: RefCallback<HTMLElement>; width: number } {
  const { ref, width } = useElementSize();
  return { ref, width: width || USUAL_WIDTH };
}

/**
 * Which of `count` places of a chart is read, by pointer or by arrow keys (Page keys: ten at once; Home, End; Escape
 * ends). `nearest` turns a distance from the chart's left edge, px, into a place; `start` is where keys begin.
 */
export function useReading({
  count,
  nearest,
  start = count - 1,
}: {
  count: number;
  nearest: (px: number) => number;
  start?: number;
}) {
  const [place, setPlace] = useState<number | null>(null);
  const move = (to: number): void => setPlace(Math.min(count - 1, Math.max(0, to)));
  const stop = (): void => setPlace(null);
  const onKeyDown = (event: KeyboardEvent): void => {
    const from = place ?? start;
    const to = {
      ArrowLeft: from - 1,
      ArrowRight: from + 1,
      PageDown: from - 10,
      PageUp: from + 10,
      Home: 0,
      End: count - 1,
    }[event.key];
    if (event.key === 'Escape') stop();
    if (to === undefined) return;
    event.preventDefault();
    move(to);
  };
  return {
    at: place === null ? null : Math.min(place, count - 1),
    reading: {
      tabIndex: 0,
      onPointerMove: (event: PointerEvent<Element>) =>
        move(nearest(event.clientX - event.currentTarget.getBoundingClientRect().left)),
      onPointerLeave: stop,
      onKeyDown,
      onBlur: stop,
    },
  };
}

/** The numbers of a chart as a table, made when asked for. The first column names the row. */
export function TableView({
  columns,
  rows,
}: {
  columns: readonly string[];
  rows: () => readonly (readonly string[])[];
}) {
  const [open, setOpen] = useState(false);
  return (
    <details className="small no-print" onToggle={(event) => setOpen(event.currentTarget.open)}>
      <summary className="soft">The same as a table</summary>
      {open && (
        <div
          style={{ maxHeight: 240, overflow: 'auto' }}
          tabIndex={0}
          role="region"
          aria-label={`Table of ${columns.slice(1).join(', ')}`}
        >
          <table className="plain-table">
            <thead>
              <tr>
                {columns.map((column) => (
                  <th key={column}>{column}</th>
                ))}
              </tr>
            </thead>
            <tbody>
              {rows().map((row, i) => (
                <tr key={i}>
                  {row.map((cell, j) => (
                    <td key={columns[j]}>{cell}</td>
                  ))}
                </tr>
              ))}
            </tbody>
          </table>
        </div>
      )}
    </details>
  );
}

/** Round marks within [low, high], about `wanted` of them. */
export function roundMarks(low: number, high: number, wanted = 5): number[] {
  const raw = (high - low) / wanted;
  if (!(raw > 0) || !Number.isFinite(raw)) return [];
  const scale = 10 ** Math.floor(Math.log10(raw));
  const step = [1, 2, 5, 10].map((m) => m * scale).find((s) => s >= raw * 0.999)!;
  const first = Math.ceil(low / step - 1e-9);
  const last = Math.floor(high / step + 1e-9);
  return Array.from({ length: last - first + 1 }, (_, i) => Number(((first + i) * step).toPrecision(12)));
}
