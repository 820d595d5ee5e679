import { act, screen, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { describe, expect, test } from 'vitest';
import type { LiveTile, StripPoint } from '../src/api/live';
import { AxisTile } from '../src/features/fleet/axis-tile';
import type { Axis } from '../src/features/fleet/fleet-api';
import { Component as FleetPage } from '../src/features/fleet/fleet-page';
import { LiveTiles } from '../src/features/fleet/live-tiles';
import { axisOf } from './axis-of';
import { show } from './show';
import { refusal, serviceOfTests, showPage } from './show-page';

const tileOf = (differs: Partial<LiveTile>): LiveTile => ({
  id: 3,
  state: 'in-tune',
  stateReason: 'K and pole within 2 % of baseline.',
  indicators: {
    peakFollowingError: 0.4,
    rmsFollowingError: 0.2,
    saturatedPct: 0,
    at: '2026-12-01T06:10:00.000Z',
  },
  estimate: null,
  seconds: [],
  ...differs,
});

const seconds = (from: number, count: number): StripPoint[] =>
  Array.from({ length: count }, (_, i) => [from + i, 0.1, 20, 0]);

describe('live values', () => {
  test('join the history without doubling a second, and keep two minutes', () => {
    const tiles = new LiveTiles();
    tiles.take([tileOf({ seconds: seconds(200, 5) })]);
    tiles.fill(3, seconds(100, 103));
    const times = tiles.get(3).strip.map(([t]) => t);
    expect(times).toHaveLength(105);
    expect(new Set(times).size).toBe(105);
    for (let t = 205; t < 260; t++) tiles.take([tileOf({ seconds: seconds(t, 1) })]);
    expect(tiles.get(3).strip.map(([t]) => t)).toEqual(Array.from({ length: 120 }, (_, i) => 140 + i));
  });

  test('of one axis move its own tile and no other', () => {
    const tiles = new LiveTiles();
    const moved: number[] = [];
    tiles.listen(3, () => moved.push(3));
    const stop = tiles.listen(4, () => moved.push(4));
    tiles.take([tileOf({ id: 3 })]);
    expect(moved).toEqual([3]);
    stop();
    tiles.take([tileOf({ id: 4 })]);
    expect(moved).toEqual([3]);
  });
});

describe('a tile', () => {
  const tile = (): HTMLElement => screen.getByRole('article');

  test('follows its axis from In tune to Out of tune: word, reason, figures, edge', () => {
    const tiles = new LiveTiles();
    show(<AxisTile axis={axisOf({})} tiles={tiles} />);
    expect(tile()).toHaveTextContent('In tune');
    expect(tile()).toHaveTextContent('0.40 of 0.85 mm');
    const edge = tile().querySelector('svg')!.innerHTML;
    act(() =>
      tiles.take([
        tileOf({
          state: 'out-of-tune',
          stateReason: 'Following error beyond its 0.85 mm. Peak 1.2 mm in the last minute.',
          indicators: {
            peakFollowingError: 1.2,
            rmsFollowingError: 0.5,
            saturatedPct: 12.24,
            at: '2026-12-01T06:11:00Z',
          },
        }),
      ]),
    );
    expect(tile()).toHaveTextContent('Out of tune');
    expect(tile()).toHaveTextContent('1.20 of 0.85 mm');
    expect(tile()).toHaveTextContent('12.2 %');
    expect(within(tile()).getByText('Following error beyond its 0.85 mm.').tagName).toBe('B');
    expect(tile().querySelector('svg')!.innerHTML).not.toBe(edge);
  });

  test('of a silent axis shows neither figures nor strips as if they were now', () => {
    const tiles = new LiveTiles();
    tiles.fill(3, seconds(100, 120));
    const band = (): string => tile().querySelectorAll('svg')[2]!.querySelector('path')!.getAttribute('d')!;
    const { unmount } = show(<AxisTile axis={axisOf({})} tiles={tiles} />);
    expect(band()).not.toBe('');
    unmount();
    show(
      <AxisTile
        axis={axisOf({ state: 'no-signal', stateReason: 'No samples since 06:02:11.' })}
        tiles={tiles}
      />,
    );
    expect(band()).toBe('');
    expect(tile()).not.toHaveTextContent('0.40');
    expect(tile()).not.toHaveTextContent('0.0 %');
  });

  test('leads to what needs doing: the proposal before the alert, the unacknowledged alert before others', () => {
    const openAlerts: Axis['openAlerts'] = [
      { id: 8, rule: 'gain-drift', priority: 'low', state: 'acknowledged' },
      { id: 9, rule: 'following-error', priority: 'medium', state: 'unacknowledged' },
    ];
    const { unmount } = show(<AxisTile axis={axisOf({ openAlerts })} tiles={new LiveTiles()} />);
    expect(screen.getByRole('link', { name: 'Alert unacknowledged' })).toHaveAttribute('href', '/alerts/9');
    unmount();
    show(
      <AxisTile
        axis={axisOf({ openAlerts, openProposal: { id: 2, state: 'in review' } })}
        tiles={new LiveTiles()}
      />,
    );
    expect(screen.getByRole('link', { name: 'Retune 2 in review' })).toHaveAttribute('href', '/proposals/2');
    expect(screen.queryByRole('link', { name: /Alert/ })).toBeNull();
  });
});

describe('the fleet page', () => {
  const service = serviceOfTests();
  const open = (at: string, ...axes: Axis[]): void => {
    service.current.list('/api/v1/axes', axes);
    service.current.list('/api/v1/axes/strips', []);
    service.current.list('/api/v1/machines', []);
    showPage(FleetPage, at, 'viewer', '/');
  };

  test('counts by state and opens on the filters of its address', async () => {
    open(
      '/?view=table&state=drifting',
      axisOf({ id: 1, tag: 'CU-03 feed', state: 'drifting' }),
      axisOf({ id: 2, tag: 'CU-04 feed' }),
    );
    expect(await screen.findByRole('link', { name: 'CU-03 feed' })).toHaveAttribute('href', '/axes/1');
    expect(screen.getByRole('button', { name: '1 drifting' })).toHaveAttribute('aria-pressed', 'true');
    expect(screen.getByRole('button', { name: '1 in tune' })).toHaveAttribute('aria-pressed', 'false');
    expect(screen.getByRole('radio', { name: 'table' })).toBeChecked();
  });

  test('a state that is pressed is asked of the service, and pressed again is not', async () => {
    open('/', axisOf({}));
    await screen.findByRole('article');
    const asked: string[] = [];
    service.current.on('GET /api/v1/axes', () => ({ status: 200, body: { items: [], nextCursor: null } }));
    const real = service.current.fetch;
    globalThis.fetch = (async (request: Request) => {
      asked.push(new URL(request.url).search);
      return real(request);
    }) as typeof fetch;
    await userEvent.click(screen.getByRole('button', { name: /drifting/ }));
    expect(await screen.findByText('No axis fits this filter')).toBeInTheDocument();
    expect(asked.some((query) => query.includes('state=drifting'))).toBe(true);
    await userEvent.click(screen.getByRole('button', { name: /drifting/ }));
    expect(await screen.findByRole('article')).toBeInTheDocument();
  });

  test('an empty fleet says what to do first', async () => {
    open('/');
    expect(await screen.findByText('No axes yet')).toBeInTheDocument();
  });

  test('a refusal is told, and trying again shows the fleet', async () => {
    open('/');
    service.current.on('GET /api/v1/axes', () => refusal(403, 'No role on any site yet.'));
    expect(await screen.findByRole('alert')).toHaveTextContent('No role on any site yet.');
    service.current.list('/api/v1/axes', [axisOf({})]);
    await userEvent.click(screen.getByRole('button', { name: 'Try again' }));
    expect(await screen.findByRole('article')).toHaveTextContent('GL-02 carriage');
  });
});
