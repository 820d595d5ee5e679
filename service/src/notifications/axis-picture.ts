import type { LnCovariance } from '../identification/plant-estimate.js';
import { escapeHtml } from './mail-text.js';

/** What an axis's small picture shows. */
export interface AxisPictureFacts {
  tag: string;
  /** K/K₀ and α/α₀ with the covariance of their logarithms; null where no estimate or no baseline is known. */
  drift: { gainRatio: number; poleRatio: number; covariance: LnCovariance } | null;
  tolerances: { followingError: number; gainPct: number; polePct: number };
  /** By second: [s since 1970, peak following error mm, peak output %, % of moving time at the limit]. */
  seconds: readonly (readonly [number, number, number, number])[];
}

const WIDTH = 320;
const HEIGHT = 132;
const PLOT = { x: 8, y: 24, size: 84 };
const STRIP = { x: 108, width: 204, height: 30 };
const ERROR_TOP = 24;
const OUTPUT_TOP = 78;
/** s that a strip shows */
const SPAN = 120;
/** χ² with two degrees of freedom at 95 %. */
const CHI_SQUARE_95 = 5.991;

const GROUND = '#FFFEFB';
const INK = '#1C2733';
const SOFT = '#55606B';
const RULE = '#D9D4C7';
const OUT = '#A8323F';

/**
 * An axis as a tile shows it: K/K₀ across and α/α₀ up, logarithmic from a half to double, with the tolerance box and the
 * 95 % ellipse; beside it the following error and the output of the last two minutes. SVG, with the same in words.
 */
export function axisPicture(facts: AxisPictureFacts): { svg: string; text: string } {
  const { tag, tolerances, seconds } = facts;
  const text = pictureWords(facts);
  const label = (x: number, y: number, words: string): string =>
    `<text x="${x}" y="${y}" font-size="9" font-family="DejaVu Sans" fill="${SOFT}">${escapeHtml(words)}</text>`;
  const svg = [
    `<svg xmlns="http://www.w3.org/2000/svg" width="${WIDTH}" height="${HEIGHT}" viewBox="0 0 ${WIDTH} ${HEIGHT}">`,
    `<rect width="${WIDTH}" height="${HEIGHT}" fill="${GROUND}" stroke="${RULE}"/>`,
    `<text x="8" y="15" font-size="11" font-family="DejaVu Sans" fill="${INK}">${escapeHtml(tag)}</text>`,
    driftPlot(facts),
    label(PLOT.x, PLOT.y + PLOT.size + 12, 'K/K₀ across, α/α₀ up'),
    errorStrip(seconds, tolerances.followingError),
    label(STRIP.x, ERROR_TOP + STRIP.height + 11, `following error, ±${tolerances.followingError} mm dashed`),
    outputStrip(seconds),
    label(STRIP.x, OUTPUT_TOP + STRIP.height + 11, 'output 0 to 100 %, at its limit red'),
    '</svg>',
  ].join('');
  return { svg, text };
}

function driftPlot({ drift, tolerances }: AxisPictureFacts): string {
  const { x: left, y: top, size } = PLOT;
  const x = (ratio: number): number => left + size / 2 + Math.log2(ratio) * size * 0.5;
  const y = (ratio: number): number => top + size / 2 - Math.log2(ratio) * size * 0.5;
  const k = tolerances.gainPct / 100;
  const a = tolerances.polePct / 100;
  const parts = [
    `<clipPath id="plot"><rect x="${left}" y="${top}" width="${size}" height="${size}"/></clipPath>`,
    `<rect x="${left}" y="${top}" width="${size}" height="${size}" fill="none" stroke="${RULE}"/>`,
    `<path d="M${left + size / 2} ${top}v${size}M${left} ${top + size / 2}h${size}" stroke="${RULE}"/>`,
    `<g clip-path="url(#plot)"><rect x="${x(1 - k)}" y="${y(1 + a)}" width="${x(1 + k) - x(1 - k)}" height="${y(1 - a) - y(1 + a)}" fill="none" stroke="${SOFT}"/>`,
  ];
  if (drift) {
    const { gain, cross, pole } = drift.covariance;
    const mean = (gain + pole) / 2;
    const spread = Math.hypot((gain - pole) / 2, cross);
    const scale = (size * 0.5) / Math.LN2;
    const half = (variance: number): number =>
      Math.max(1, Math.sqrt(CHI_SQUARE_95 * Math.max(0, variance)) * scale);
    const angle = (0.5 * Math.atan2(2 * cross, gain - pole) * 180) / Math.PI;
    const [px, py] = [x(drift.gainRatio), y(drift.poleRatio)];
    parts.push(
      `<ellipse cx="${px}" cy="${py}" rx="${half(mean + spread)}" ry="${half(mean - spread)}" transform="rotate(${-angle} ${px} ${py})" fill="${OUT}" fill-opacity=".2" stroke="${OUT}"/>`,
    );
    // Beyond the frame the mark rests on its rim.
    const inside = (value: number, low: number): number => Math.min(low + size - 3, Math.max(low + 3, value));
    parts.push(`</g><circle cx="${inside(px, left)}" cy="${inside(py, top)}" r="3" fill="${INK}"/>`);
  } else parts.push('</g>');
  return parts.join('');
}

type Seconds = AxisPictureFacts['seconds'];

/** The seconds that a strip shows, each with its left edge: the newest at the right end, a missing one a hole. */
function placed(seconds: Seconds): { left: number; second: Seconds[number] }[] {
  const newest = seconds.at(-1)?.[0] ?? 0;
  return seconds
    .filter(([t]) => t > newest - SPAN)
    .map((second) => ({
      left: STRIP.x + STRIP.width - ((newest - second[0] + 1) * STRIP.width) / SPAN,
      second,
    }));
}

const STEP = STRIP.width / SPAN;

function errorStrip(seconds: Seconds, tolerance: number): string {
  const middle = ERROR_TOP + STRIP.height / 2;
  const reach = STRIP.height * 0.36;
  const bars = placed(seconds).map(({ left, second: [, error] }) => {
    const half = Math.max(0.4, Math.min(STRIP.height / 2, (error / tolerance) * reach));
    return `M${left.toFixed(1)} ${(middle - half).toFixed(1)}h${STEP.toFixed(2)}v${(2 * half).toFixed(1)}h${(-STEP).toFixed(2)}Z`;
  });
  return `<path d="${bars.join('')}" fill="${INK}" fill-opacity=".7"/><path d="M${STRIP.x} ${middle - reach}h${STRIP.width}M${STRIP.x} ${middle + reach}h${STRIP.width}" stroke="${SOFT}" stroke-dasharray="3 3"/>`;
}

function outputStrip(seconds: Seconds): string {
  const foot = OUTPUT_TOP + STRIP.height;
  const bar = (left: number, share: number): string => {
    const tall = (Math.min(1, share) * STRIP.height).toFixed(1);
    return `M${left.toFixed(1)} ${foot}v-${tall}h${(STEP * 0.8).toFixed(2)}v${tall}Z`;
  };
  const all = placed(seconds);
  const peaks = all.map(({ left, second: [, , output] }) => bar(left, output / 100));
  const limited = all.flatMap(({ left, second: [, , , share] }) =>
    share > 0 ? [bar(left, Math.max(0.12, share / 100))] : [],
  );
  return `<path d="${peaks.join('')}" fill="${SOFT}" fill-opacity=".4"/><path d="${limited.join('')}" fill="${OUT}"/><path d="M${STRIP.x} ${foot}h${STRIP.width}" stroke="${RULE}"/>`;
}

function pictureWords({ tag, drift, tolerances, seconds }: AxisPictureFacts): string {
  const pct = (ratio: number): string =>
    `${ratio < 1 ? '−' : '+'}${Math.abs((ratio - 1) * 100).toFixed(0)} %`;
  const recent = placed(seconds).map(({ second }) => second);
  const peak = (pick: 1 | 2): number => recent.reduce((most, second) => Math.max(most, second[pick]), 0);
  return [
    `${tag}:`,
    drift
      ? `gain ${pct(drift.gainRatio)} (tolerance ±${tolerances.gainPct} %), pole ${pct(drift.poleRatio)} (±${tolerances.polePct} %) against baseline;`
      : 'gain and pole not known;',
    recent.length > 0
      ? `in the last two minutes following error up to ${peak(1).toFixed(2)} mm (tolerance ${tolerances.followingError} mm), output up to ${peak(2).toFixed(0)} %.`
      : 'no samples in the last two minutes.',
  ].join(' ');
}
