import { describe, expect, test } from 'vitest';
import { DriftPlot } from '../src/charts/drift-plot';
import { show } from './show';

const SIZE = 72;
const tolerances = { gainPct: 15, polePct: 20 };

function plot(props: Partial<Parameters<typeof DriftPlot>[0]>): Element {
  return show(
    <DriftPlot state="drifting" point={null} tolerances={tolerances} size={SIZE} {...props} />,
  ).container.querySelector('svg')!;
}

const attribute = (element: Element | null, name: string): number => Number(element?.getAttribute(name));

describe('drift plot', () => {
  test('baseline is the middle, half and double are the rims, in both directions', () => {
    const circle = (gainRatio: number, poleRatio: number) =>
      plot({ point: { gainRatio, poleRatio } }).querySelector('circle')!;
    expect(attribute(circle(1, 1), 'cx')).toBe(SIZE / 2);
    expect(attribute(circle(1, 1), 'cy')).toBe(SIZE / 2);
    // √2 is a quarter of the frame from the middle; α grows upward.
    expect(attribute(circle(Math.SQRT2, Math.SQRT2), 'cx')).toBeCloseTo(SIZE * 0.75, 9);
    expect(attribute(circle(Math.SQRT2, Math.SQRT2), 'cy')).toBeCloseTo(SIZE * 0.25, 9);
  });

  test('the box is the tolerance on logarithmic axes', () => {
    const box = plot({}).querySelectorAll('rect')[2]!;
    const left = attribute(box, 'x');
    const top = attribute(box, 'y');
    expect(left).toBeCloseTo(SIZE / 2 + (SIZE / 2) * Math.log2(0.85), 9);
    expect(left + attribute(box, 'width')).toBeCloseTo(SIZE / 2 + (SIZE / 2) * Math.log2(1.15), 9);
    expect(top).toBeCloseTo(SIZE / 2 - (SIZE / 2) * Math.log2(1.2), 9);
    expect(top + attribute(box, 'height')).toBeCloseTo(SIZE / 2 - (SIZE / 2) * Math.log2(0.8), 9);
  });

  test('the ellipse holds 95 % of (ln K, ln α): its points satisfy xᵀΣ⁻¹x = χ²', () => {
    const covariance = { gain: 0.004, cross: -0.002, pole: 0.009 };
    const ellipse = plot({ point: { gainRatio: 1, poleRatio: 1 }, covariance }).querySelector('ellipse')!;
    const rx = attribute(ellipse, 'rx');
    const ry = attribute(ellipse, 'ry');
    const turn = (Number(/rotate\((\S+)/.exec(ellipse.getAttribute('transform')!)![1]) * Math.PI) / 180;
    const scale = SIZE / 2 / Math.LN2;
    const determinant = covariance.gain * covariance.pole - covariance.cross ** 2;
    for (const at of [0, 0.7, 1.9, 3.3, 5]) {
      const [along, across] = [rx * Math.cos(at), ry * Math.sin(at)];
      const gain = (along * Math.cos(turn) - across * Math.sin(turn)) / scale;
      // Down in the picture is a smaller pole.
      const pole = -(along * Math.sin(turn) + across * Math.cos(turn)) / scale;
      const distance =
        (covariance.pole * gain ** 2 - 2 * covariance.cross * gain * pole + covariance.gain * pole ** 2) /
        determinant;
      expect(distance).toBeCloseTo(5.991, 6);
    }
  });

  test('beyond the frame the mark rests on the rim and points outward', () => {
    const svg = plot({ point: { gainRatio: 1, poleRatio: 0.2 } });
    expect(svg.querySelector('circle')).toBeNull();
    const transform = svg.querySelector('path[transform]')!.getAttribute('transform')!;
    expect(transform).toBe(`translate(${SIZE / 2} ${SIZE - 3}) rotate(90)`);
    expect(svg).toHaveAccessibleName('Drift plot: gain plus 0 %, pole minus 80 % against baseline');
  });

  test('a mark that is hardly known is hollow and says so', () => {
    const point = { gainRatio: 1.1, poleRatio: 0.9 };
    const known = plot({ point, covariance: { gain: 0.001, cross: 0, pole: 0.002 } });
    const guess = plot({ point, covariance: { gain: 0.001, cross: 0, pole: 0.1 } });
    const fill = (svg: Element) => svg.querySelector('circle')!.parentElement!.getAttribute('fill');
    expect(fill(known)).toBe('var(--drift)');
    expect(fill(guess)).toBe('var(--surface)');
    expect(guess.getAttribute('aria-label')).toContain('hardly known');
    expect(known.getAttribute('aria-label')).not.toContain('hardly known');
  });
});
