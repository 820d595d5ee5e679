import { fireEvent, screen } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { describe, expect, test } from 'vitest';
import { Bode } from '../src/charts/bode';
import { roundMarks } from '../src/charts/chart-frame';
import { HistoryChart, type HistoryPoint } from '../src/charts/history-chart';
import { MoveChart } from '../src/charts/move-chart';
import { PoleMap } from '../src/charts/pole-map';
import { ErrorStrip, OutputStrip } from '../src/charts/strips';
import { TraceStore } from '../src/charts/trace-store';
import { show } from './show';

const start = Date.parse('2026-12-01T06:00:00Z');
const points: HistoryPoint[] = [10, 10.2, 9.9, 8.1, 7.9].map((value, i) => ({
  at: new Date(start + i * 60_000).toISOString(),
  value,
  low: value - 0.5,
  high: value + 0.5,
  drifted: i >= 3,
}));
const history = (some: readonly HistoryPoint[] = points) => (
  <HistoryChart title="pole α" unit="rad/s" points={some} baseline={10} tolerancePct={20} timeZone="UTC" />
);

describe('history of a quantity', () => {
  test('arrow keys read it point by point, on the site’s clock, and stop at both ends', async () => {
    show(history());
    const chart = screen.getByRole('img', { name: /pole α over time/ });
    chart.focus();
    await userEvent.keyboard('{ArrowLeft}');
    expect(screen.getByText(/06:03:00: 8\.100 rad\/s, 95 % 7\.600 … 8\.600/)).toBeInTheDocument();
    await userEvent.keyboard('{Home}{ArrowLeft}');
    expect(screen.getByText(/06:00:00: 10\.00 rad\/s/)).toBeInTheDocument();
    await userEvent.keyboard('{Escape}');
    expect(screen.queryByText(/06:00:00/)).toBeNull();
  });

  test('the pointer reads the nearest point', () => {
    show(history());
    // Not laid out here, so the chart is 640 px wide: 54 px to its first point, 8 px after its last.
    fireEvent.pointerMove(screen.getByRole('img', { name: /pole α/ }), { clientX: 54 + (640 - 62) / 2 + 20 });
    expect(screen.getByText(/06:02:00: 9\.900/)).toBeInTheDocument();
  });

  test('drift is marked where it was decided, once', () => {
    show(history());
    expect(screen.getAllByText('drift decided')).toHaveLength(1);
  });

  test('the table has the same numbers, newest first', () => {
    show(history());
    const details = screen.getByText('The same as a table').closest('details')!;
    details.open = true;
    fireEvent(details, new Event('toggle'));
    const rows = screen.getAllByRole('row', { hidden: true }).map((row) => row.textContent);
    expect(rows).toHaveLength(points.length + 1);
    expect(rows[1]).toBe('1 Dec, 06:04:007.9007.4008.400');
  });

  test('one window is not a history, and it says so', () => {
    show(history(points.slice(0, 1)));
    expect(screen.getByText(/not enough windows/)).toBeInTheDocument();
  });
});

test('a move: before dashed, after solid, both read at the same time', async () => {
  const { container } = show(
    <MoveChart
      title="following error"
      unit="mm"
      limit={{ value: 0.8, label: 'allowed 0.8 mm' }}
      series={[
        { label: 'before', time: [0, 1, 2], values: [0, 1.5, 0], dashed: true },
        { label: 'after', time: [0, 1, 2], values: [0, -0.5, 0] },
      ]}
    />,
  );
  const lines = [...container.querySelectorAll('path[stroke="var(--ink)"]')];
  expect(lines.map((line) => line.hasAttribute('stroke-dasharray'))).toEqual([true, false]);
  screen.getByRole('img').focus();
  await userEvent.keyboard('{Home}' + '{PageUp}'.repeat(10));
  expect(screen.getByText('1.00 s: before 1.500 mm, after −0.500 mm')).toBeInTheDocument();
});

test('Bode: one frequency axis, dB and degrees of every curve at the place that is read', async () => {
  // An integrator K/s with K = 2π: 0 dB at 1 Hz, −90° everywhere.
  const frequencyHz = [0.1, 1, 10];
  show(
    <Bode
      curves={[
        { label: 'as it runs', frequencyHz, magnitudeDb: [20, 0, -20], phaseDeg: [-90, -90, -90] },
        {
          label: 'as designed',
          frequencyHz,
          magnitudeDb: [26, 6, -14],
          phaseDeg: [-95, -90, -85],
          dashed: true,
        },
      ]}
    />,
  );
  screen.getByRole('img').focus();
  await userEvent.keyboard('{ArrowRight}');
  expect(
    screen.getByText('10.0 Hz: as it runs −20.0 dB, −90°; as designed −14.0 dB, −85°'),
  ).toBeInTheDocument();
});

describe('pole map', () => {
  test('scales are equal: a pole at 45° is as far left as it is up', () => {
    const { container } = show(
      <PoleMap
        sets={[
          {
            label: 'now',
            poles: [
              { re: -3, im: 3 },
              { re: -3, im: -3 },
              { re: -9, im: 0 },
            ],
          },
        ]}
      />,
    );
    const place = (i: number): [number, number] => {
      const d = container.querySelectorAll('path[stroke="var(--ink)"]')[i]!.getAttribute('d')!;
      const [, x, y] = /M(\S+) (\S+?)l/.exec(d)!;
      return [Number(x) + 5, Number(y) + 5];
    };
    const [pairX, pairY] = place(0);
    const [realX, realY] = place(2);
    expect((pairX - realX) / 6).toBeCloseTo((realY - pairY) / 3, 6);
  });

  test('a triple pole is one cross with its number', () => {
    const triple = Array.from({ length: 3 }, () => ({ re: -20, im: 0 }));
    const { container } = show(<PoleMap sets={[{ label: 'as designed', poles: triple }]} />);
    expect(container.querySelectorAll('path[stroke="var(--ink)"]')).toHaveLength(1);
    expect(screen.getByText('3 as designed')).toBeInTheDocument();
  });
});

describe('strips', () => {
  test('a second without samples is a hole, not a bridge', () => {
    const { container } = show(
      <ErrorStrip
        tolerance={1}
        colour="var(--ink)"
        points={[
          [100, 0.5, 10, 0],
          [101, 0.5, 10, 0],
          [104, 0.5, 10, 0],
        ]}
      />,
    );
    const d = container.querySelector('path')!.getAttribute('d')!;
    const starts = [...d.matchAll(/M(\S+) /g)].map(([, x]) => Number(x));
    // Two pixels of 240 a second; the newest second ends at the right edge.
    expect(starts).toEqual([230, 232, 238]);
  });

  test('error at its tolerance reaches the dashed lines', () => {
    const { container } = show(
      <ErrorStrip height={20} tolerance={0.8} colour="red" points={[[100, 0.8, 0, 0]]} />,
    );
    const [band, lines] = container.querySelectorAll('path');
    const top = Number(/M\S+ (\S+?)h/.exec(band!.getAttribute('d')!)![1]);
    const dashed = Number(/M0 (\S+?)H/.exec(lines!.getAttribute('d')!)![1]);
    expect(top).toBeCloseTo(dashed, 1);
  });

  test('seconds at the limit are filled in the colour of the state', () => {
    const { container } = show(
      <OutputStrip
        colour="red"
        points={[
          [100, 0, 40, 0],
          [101, 0, 100, 30],
        ]}
      />,
    );
    const filled = container.querySelector('path[fill="red"]')!.getAttribute('d')!;
    expect(filled.match(/M/g)).toHaveLength(1);
    expect(filled).toMatch(/^M238/);
  });
});

describe('live trace', () => {
  const frame = (from: number, seconds: number, step = 0.01) => {
    const time = Array.from({ length: Math.round(seconds / step) }, (_, i) => from + i * step);
    return {
      axisId: 1,
      time,
      target: time.map(() => 5),
      position: time.map(() => 4.75),
      output: time.map(() => 12),
    };
  };

  test('keeps the last 20 s and the following error that belongs to them', () => {
    const store = new TraceStore();
    for (let second = 0; second < 30; second++) store.push(frame(second, 1));
    const [time, , , error] = store.rows;
    expect(time.at(-1)! - time[0]!).toBeLessThanOrEqual(20);
    expect(time.at(-1)! - time[0]!).toBeGreaterThan(19.9);
    expect(store.rows.every((row) => row.length === time.length)).toBe(true);
    expect(new Set(error)).toEqual(new Set([0.25]));
  });

  test('what is held stays while more arrives', () => {
    const store = new TraceStore();
    store.push(frame(0, 1));
    const held = store.held();
    store.push(frame(1, 1));
    expect(held[0]).toHaveLength(100);
    expect(store.rows[0]).toHaveLength(200);
  });
});

test('marks are round, within the range, and none come from no range', () => {
  expect(roundMarks(0, 2.3)).toEqual([0, 0.5, 1, 1.5, 2]);
  expect(roundMarks(-7, 7, 3)).toEqual([-5, 0, 5]);
  expect(roundMarks(3, 3)).toEqual([]);
  expect(roundMarks(0, Infinity)).toEqual([]);
});
