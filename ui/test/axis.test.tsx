import { act, screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { beforeEach, describe, expect, test, vi } from 'vitest';
import type { Role } from '../src/api/policy';
import { LiveTraceChart } from '../src/charts/live-trace';
import { TraceStore } from '../src/charts/trace-store';
import { Component as AxisPage } from '../src/features/axis/axis-page';
import type { Axis } from '../src/features/fleet/fleet-api';
import { axisOf } from './axis-of';
import { show } from './show';
import { refusal, serviceOfTests, showPage } from './show-page';

/** What each plot was last given to draw. There is no canvas here. */
const drawn = vi.hoisted(() => [] as unknown[][][]);
vi.mock('uplot', () => ({
  default: class {
    private readonly index = drawn.push([]) - 1;
    setData(data: unknown[][]): void {
      drawn[this.index] = data;
    }
    setSize(): void {}
    setCursor(): void {}
    valToPos = (): number => 0;
    destroy(): void {}
  },
}));
beforeEach(() => void drawn.splice(0));

const second = (from: number) => {
  const time = Array.from({ length: 100 }, (_, i) => from + i / 100);
  return {
    axisId: 3,
    time,
    target: time.map((t) => t * 10),
    position: time.map((t) => t * 10 - 0.5),
    output: time.map(() => -20),
  };
};

describe('live trace', () => {
  test('draws what arrives; held, it stays and can be read by keyboard; then it goes on', async () => {
    const store = new TraceStore();
    show(<LiveTraceChart store={store} timeZone="UTC" />);
    expect(screen.getByText('Waiting for samples …')).toBeInTheDocument();
    act(() => store.push(second(1000)));
    expect(screen.queryByText('Waiting for samples …')).toBeNull();
    expect(drawn.map(([time]) => time!.length)).toEqual([100, 100, 100]);
    await userEvent.click(screen.getByRole('button', { name: 'Hold' }));
    act(() => store.push(second(1001)));
    expect(drawn[0]![0]).toHaveLength(100);
    screen.getByRole('group', { name: /Live trace/ }).focus();
    await userEvent.keyboard('{ArrowLeft}');
    expect(
      screen.getByText(/target 10009\.800 mm, position 10009\.300 mm, error 0\.5000 mm, output −20\.0 %/),
    ).toBeInTheDocument();
    await userEvent.click(screen.getByRole('button', { name: 'Go on' }));
    expect(drawn[0]![0]).toHaveLength(200);
  });
});

describe('the axis page', () => {
  const service = serviceOfTests();
  const open = async (role: Role, differs: Partial<Axis> = {}): Promise<void> => {
    service.current.on('GET /api/v1/axes/3', () => ({ status: 200, body: axisOf(differs) }));
    for (const path of ['axes/3/estimates', 'axes/3/tunings', 'alerts', 'proposals'])
      service.current.list(`/api/v1/${path}`, []);
    showPage(AxisPage, '/axes/3', role, '/axes/:id');
    await screen.findByRole('heading', { name: 'GL-02 carriage' });
  };
  const buttons = (): string[] =>
    screen
      .getAllByRole('button')
      .map(({ textContent }) => textContent)
      .filter((words) => /proposal|Maintenance|baseline|production/.test(words));

  test.each([
    ['viewer', []],
    ['technician', ['Maintenance …']],
    ['engineer', ['Start a proposal', 'Maintenance …', 'Take as baseline …']],
    ['administrator', []],
  ] as const)('a %s is offered what the role may do', async (role, offered) => {
    await open(role);
    expect(buttons()).toEqual(offered);
  });

  test('maintenance asks for a reason, is sent once with its end, and keeps what was typed when refused', async () => {
    await open('technician');
    service.current.on('POST /api/v1/axes/3/maintenance', () => refusal(409, 'The axis is being changed.'));
    await userEvent.click(screen.getByRole('button', { name: 'Maintenance …' }));
    const dialog = await screen.findByRole('dialog', { name: 'Maintenance: GL-02 carriage' });
    const put = within(dialog).getByRole('button', { name: 'Put it in maintenance' });
    expect(put).toBeDisabled();
    await userEvent.type(within(dialog).getByLabelText(/Reason/), 'new seal');
    await userEvent.click(put);
    expect(await within(dialog).findByRole('alert')).toHaveTextContent('The axis is being changed.');
    expect(within(dialog).getByLabelText(/Reason/)).toHaveValue('new seal');
    const [sent] = service.current.bodies('POST /api/v1/axes/3/maintenance') as [
      { on: boolean; reason: string; until: string },
    ];
    expect(sent).toMatchObject({ on: true, reason: 'new seal' });
    expect(Date.parse(sent.until) - Date.now()).toBeGreaterThan(1.9 * 3_600_000);
    service.current.on('POST /api/v1/axes/3/maintenance', () => ({ status: 200, body: axisOf({}) }));
    await userEvent.click(put);
    await waitFor(() => expect(screen.queryByRole('dialog')).toBeNull());
    expect(service.current.bodies('POST /api/v1/axes/3/maintenance')).toHaveLength(2);
  });

  test('an axis without baseline and estimate says what is missing instead of showing figures', async () => {
    await open('engineer', { baseline: null, estimate: null, gains: null });
    expect(screen.getByText('no estimate yet')).toBeInTheDocument();
    expect(screen.getByText(/commission the axis first/)).toBeInTheDocument();
    expect(screen.getByRole('img', { name: 'Drift plot: nothing known yet' })).toBeInTheDocument();
    expect(buttons()).toEqual(['Maintenance …']);
  });

  test('an axis that is not there, or not for this person, is said to be not found', async () => {
    showPage(AxisPage, '/axes/99', 'viewer', '/axes/:id');
    expect(await screen.findByRole('heading', { name: 'Axis 99: not found' })).toBeInTheDocument();
  });
});
