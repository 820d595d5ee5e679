import { act, screen } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { afterEach, describe, expect, test, vi } from 'vitest';
import { Problem, type Schemas } from '../src/api/client';
import { Caution } from '../src/components/caution';
import { ConfirmDialog } from '../src/components/confirm-dialog';
import { LambdaRuler, rulerText } from '../src/components/lambda-ruler';
import { ErrorState } from '../src/components/notices';
import { decimalsFor, Quantity, significant } from '../src/components/quantity';
import { SiteTime } from '../src/components/site-time';
import { StateEdge } from '../src/components/state-edge';
import { StateGlyph } from '../src/components/state-glyph';
import { STATE_WORDS, STATES_WORST_FIRST } from '../src/components/states';
import { show } from './show';

describe('a quantity', () => {
  test('shows no digit that its interval does not support', () => {
    const text = (value: number, half: number) =>
      show(<Quantity value={value} low={value - half} high={value + half} unit="rad/s" />).container
        .textContent;
    expect(text(10.0847, 1.123)).toContain('10.1 ± 1.1 rad/s');
    expect(text(10.0847, 0.0123)).toContain('10.085 ± 0.012 rad/s');
    expect(text(1234.56, 87)).toContain('1235 ± 87 rad/s');
    expect(text(-0.213, 0.14)).toContain('−0.21 ± 0.14');
  });

  test('an interval of no width or no bound gives no false precision', () => {
    expect(decimalsFor(0)).toBe(2);
    expect(decimalsFor(Infinity)).toBe(2);
    expect(decimalsFor(1e-12)).toBe(6);
  });

  test('significant digits, with a true minus', () => {
    expect(significant(0)).toBe('0');
    expect(significant(-12.345)).toBe('−12.3');
    expect(significant(0.0012345)).toBe('0.00123');
    expect(significant(12345)).toBe('12345');
  });
});

describe('the edge is the state', () => {
  test('every state has an edge and a glyph of its own, apart without colour', () => {
    const shape = (markup: string): string => markup.replace(/var\(--[a-z-]+\)/g, '');
    const edges = STATES_WORST_FIRST.map((state) =>
      shape(show(<StateEdge state={state} />).container.innerHTML),
    );
    const glyphs = STATES_WORST_FIRST.map((state) =>
      shape(show(<StateGlyph state={state} />).container.innerHTML),
    );
    expect(new Set(edges).size).toBe(5);
    expect(new Set(glyphs).size).toBe(5);
    expect(Object.keys(STATE_WORDS).sort()).toEqual([...STATES_WORST_FIRST].sort());
  });
});

describe('a time on the site’s clock', () => {
  afterEach(() => void vi.useRealTimers());

  test('is exact on hover and machine-readable, whatever the reader’s own zone is', () => {
    const { container } = show(<SiteTime at="2026-07-01T22:30:15Z" timeZone="Europe/London" />);
    const time = container.querySelector('time')!;
    expect(time).toHaveTextContent('1 Jul, 23:30');
    expect(time).toHaveAttribute('title', 'Wed 1 Jul 2026, 23:30:15 (Europe/London)');
    expect(time).toHaveAttribute('datetime', '2026-07-01T22:30:15.000Z');
  });

  test('how long ago keeps counting', () => {
    vi.useFakeTimers();
    const at = new Date(Date.now());
    const { container } = show(<SiteTime at={at} timeZone="UTC" relative />);
    act(() => void vi.advanceTimersByTime(5 * 60_000));
    expect(container).toHaveTextContent('5 minutes ago');
  });
});

const binding: Schemas['BindingDto'] = {
  commissionedLambda: 20,
  lambda: 17.5,
  kept: false,
  reason: 'Output headroom forbids more than 17.5 rad/s.',
  allowed: { low: 9, high: 17.5 },
  searched: { low: 1, high: 200 },
  waysOut: [],
  upper: { name: 'output-headroom', lambda: 17.5 },
  lower: { name: 'following-error', lambda: 9 },
  limits: [
    { name: 'output-headroom', side: 'upper', lambda: 17.5 },
    { name: 'sensitivity', side: 'upper', lambda: 41 },
    { name: 'output-ripple', side: 'upper', lambda: null },
    { name: 'following-error', side: 'lower', lambda: 9 },
  ],
};

describe('λ ruler', () => {
  test('names what binds, leaves out what limits nothing, and says it in words', () => {
    show(<LambdaRuler binding={binding} />);
    expect(screen.getByText('output headroom binds')).toBeInTheDocument();
    expect(screen.getByText('following error binds')).toBeInTheDocument();
    expect(screen.getByText('sensitivity Ms')).toBeInTheDocument();
    expect(screen.queryByText(/output ripple/)).toBeNull();
    expect(screen.getByRole('img')).toHaveAccessibleName('λ may go from 9.0 to 17.5 rad/s; 17.5 is proposed');
  });

  test('is logarithmic: equal ratios are equal distances', () => {
    const { container } = show(<LambdaRuler binding={binding} />);
    const place = (word: string): number =>
      Number(
        [...container.querySelectorAll('text')]
          .find(({ textContent }) => textContent === word)!
          .getAttribute('x'),
      );
    expect((place('50') - place('20')) / (place('20') - place('10'))).toBeCloseTo(
      Math.log(2.5) / Math.log(2),
      6,
    );
  });

  test('says why when nothing is allowed', () => {
    expect(rulerText({ ...binding, allowed: null, lambda: null, reason: 'Slow the move.' })).toBe(
      'No λ is allowed. Slow the move.',
    );
  });
});

describe('asking and telling', () => {
  test('a dialog acts once asked, by the Enter key too, and shows why it could not', async () => {
    const confirmed = vi.fn();
    const closed = vi.fn();
    show(
      <ConfirmDialog
        opened
        title="Roll back: CU-03 feed"
        confirmLabel="Roll back"
        danger
        problem="The axis is moving."
        onConfirm={confirmed}
        onClose={closed}
      >
        <input aria-label="Reason" />
      </ConfirmDialog>,
    );
    expect(screen.getByRole('dialog', { name: 'Roll back: CU-03 feed' })).toBeInTheDocument();
    expect(screen.getByRole('alert')).toHaveTextContent('The axis is moving.');
    await userEvent.type(screen.getByLabelText('Reason'), 'hums{Enter}');
    expect(confirmed).toHaveBeenCalledTimes(1);
    await userEvent.click(screen.getByRole('button', { name: 'Cancel' }));
    expect(closed).toHaveBeenCalledTimes(1);
    expect(confirmed).toHaveBeenCalledTimes(1);
  });

  test('a refusal is told in the service’s words, silence in ours, and both can be tried again', async () => {
    const again = vi.fn();
    const { rerender } = show(
      <ErrorState error={new Problem(403, { detail: 'Engineers only.' })} what="The bench" onRetry={again} />,
    );
    expect(screen.getByRole('alert')).toHaveTextContent('Engineers only.');
    await userEvent.click(screen.getByRole('button', { name: 'Try again' }));
    expect(again).toHaveBeenCalledTimes(1);
    rerender(<ErrorState error={new TypeError('Failed to fetch')} what="The bench" />);
    expect(screen.getByRole('alert')).toHaveTextContent('The service does not answer.');
    expect(screen.getByRole('alert')).not.toHaveTextContent('Failed to fetch');
    rerender(<ErrorState error={new Problem(404, {})} what="Axis 99" />);
    expect(screen.getByRole('heading')).toHaveTextContent('Axis 99: not found');
  });

  test('the caution has every sentence that safety asks for', () => {
    show(<Caution />);
    const note = screen.getByRole('note');
    for (const part of [
      'unexpectedly',
      'Keep people clear',
      'lockout/tagout',
      'local codes',
      'authorised and competent',
      'reduced speed',
      'emergency stop',
      'not a safety function',
    ])
      expect(note).toHaveTextContent(part);
  });
});
