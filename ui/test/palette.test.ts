import { describe, expect, test } from 'vitest';
import { palette } from '../src/theme/palette';

type Scheme = keyof typeof palette;
type Colour = keyof (typeof palette)['light'];

const channels = (hex: string): number[] =>
  [1, 3, 5].map((at) => {
    const share = parseInt(hex.slice(at, at + 2), 16) / 255;
    return share <= 0.04045 ? share / 12.92 : ((share + 0.055) / 1.055) ** 2.4;
  });

/** WCAG 2.2, "relative luminance" of an sRGB colour. */
const luminance = (hex: string): number => {
  const [r, g, b] = channels(hex) as [number, number, number];
  return 0.2126 * r + 0.7152 * g + 0.0722 * b;
};

/** WCAG 2.2, "contrast ratio": (L₁ + 0.05)/(L₂ + 0.05), the lighter one above. */
const contrast = (one: string, other: string): number => {
  const [dark, light] = [luminance(one), luminance(other)].sort((a, b) => a - b) as [number, number];
  return (light + 0.05) / (dark + 0.05);
};

/**
 * Linear RGB as seen without one kind of cone: Viénot, Brettel & Mollon 1999 ("Digital video colourmaps for checking
 * the legibility of displays by dichromats"); the matrices are written from memory.
 */
const DICHROMATS: Record<string, number[][]> = {
  protanope: [
    [0.11238, 0.88762, 0],
    [0.11238, 0.88762, 0],
    [0.00401, -0.00401, 1],
  ],
  deuteranope: [
    [0.29275, 0.70725, 0],
    [0.29275, 0.70725, 0],
    [-0.02234, 0.02234, 1],
  ],
};

/** CIE 1976 L*a*b*, D65, from linear sRGB (IEC 61966-2-1). */
function lab([r, g, b]: number[]): [number, number, number] {
  const f = (t: number): number => (t > 216 / 24389 ? Math.cbrt(t) : (24389 / 27 / 116) * t + 16 / 116);
  const x = f((0.4124 * r! + 0.3576 * g! + 0.1805 * b!) / 0.9505);
  const y = f(0.2126 * r! + 0.7152 * g! + 0.0722 * b!);
  const z = f((0.0193 * r! + 0.1192 * g! + 0.9505 * b!) / 1.089);
  return [116 * y - 16, 500 * (x - y), 200 * (y - z)];
}

const apart = (one: number[], other: number[]): number => {
  const [p, q] = [lab(one), lab(other)];
  return Math.hypot(p[0] - q[0], p[1] - q[1], p[2] - q[2]);
};

test('contrast of black on white is 21, the end of the scale', () => {
  expect(contrast('#000000', '#FFFFFF')).toBeCloseTo(21, 10);
});

describe.each(Object.keys(palette) as Scheme[])('the %s scheme', (scheme) => {
  const colours = palette[scheme];
  const grounds: Colour[] = ['ground', 'surface'];
  const text: [Colour, Colour[]][] = [
    ['ink', [...grounds, 'tint-drift', 'tint-out', 'tint-held']],
    ['soft', [...grounds, 'tint-drift', 'tint-out', 'tint-held']],
    ['press', [...grounds, 'tint-drift', 'tint-out', 'tint-held']],
    ['drift', [...grounds, 'tint-drift']],
    ['out', [...grounds, 'tint-out']],
    ['silent', grounds],
    ['held', [...grounds, 'tint-held']],
    ['on-press', ['press']],
  ];
  test.each(text.flatMap(([name, on]) => on.map((ground) => [name, ground] as const)))(
    'text in %s on %s has the 4.5 of WCAG 2.2, 1.4.3',
    (name, ground) => {
      expect(contrast(colours[name], colours[ground])).toBeGreaterThanOrEqual(4.5);
    },
  );
  test('Drifting and Out of tune stay apart from ink and from each other for dichromats', () => {
    for (const [kind, matrix] of Object.entries(DICHROMATS)) {
      const seen = (name: Colour): number[] => {
        const rgb = channels(colours[name]);
        return matrix.map((row) =>
          Math.min(
            1,
            Math.max(
              0,
              row.reduce((sum, weight, i) => sum + weight * rgb[i]!, 0),
            ),
          ),
        );
      };
      // A just noticeable difference is about 2.3 (Mahy et al. 1994); ten of them are seen at a glance.
      for (const [one, other] of [
        ['drift', 'ink'],
        ['out', 'ink'],
        ['drift', 'out'],
      ] as const)
        expect(apart(seen(one), seen(other)), `${one} and ${other}, ${kind}`).toBeGreaterThan(23);
    }
  });
});
