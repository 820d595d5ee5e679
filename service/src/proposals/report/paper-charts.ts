/** Charts drawn as vectors on paper, in black and greys: before is always dashed, after solid. */
type Paper = PDFKit.PDFDocument;

export interface Box {
  x: number;
  y: number;
  width: number;
  height: number;
}

export interface PaperSeries {
  x: readonly number[];
  y: readonly number[];
  dashed?: boolean;
}

const INK = '#1C2733';
const SOFT = '#5B6672';
const RULE = '#B9B4A7';
const LABEL = 7.5;

/** Steps of 1, 2 or 5 times a power of ten that cut a span into about `count` parts. */
export function niceStep(span: number, count: number): number {
  const rough = span / count;
  const power = 10 ** Math.floor(Math.log10(rough));
  return [1, 2, 5, 10].map((m) => m * power).find((step) => step >= rough * 0.999)!;
}

const label = (value: number, step: number): string =>
  value.toFixed(Math.max(0, Math.ceil(-Math.log10(step) - 1e-9))).replace('-', '−');

/** Lines over time with titled axes, and a limit as a dotted line on either side. */
export function drawLines(
  paper: Paper,
  box: Box,
  { title, unit, series, limit }: { title: string; unit: string; series: PaperSeries[]; limit: number },
): void {
  const left = box.x + 38;
  const top = box.y + 14;
  const width = box.width - 42;
  const height = box.height - 38;
  const xs = series.flatMap(({ x }) => x);
  const ys = [...series.flatMap(({ y }) => y), limit, -limit];
  const span = [Math.min(...xs), Math.max(...xs)] as const;
  const reach = [Math.min(...ys) * 1.05, Math.max(...ys) * 1.05] as const;
  const px = (v: number): number => left + (width * (v - span[0])) / (span[1] - span[0] || 1);
  const py = (v: number): number => top + height - (height * (v - reach[0])) / (reach[1] - reach[0] || 1);
  paper
    .font('regular')
    .fontSize(LABEL)
    .fillColor(SOFT)
    .text(`${title}, ${unit}`, box.x, box.y, { lineBreak: false });
  const yStep = niceStep(reach[1] - reach[0], 6);
  for (let v = Math.ceil(reach[0] / yStep) * yStep; v <= reach[1]; v += yStep) {
    paper
      .lineWidth(0.4)
      .strokeColor(RULE)
      .undash()
      .moveTo(left, py(v))
      .lineTo(left + width, py(v))
      .stroke();
    paper.text(label(v, yStep), box.x, py(v) - 4, { width: 33, align: 'right', lineBreak: false });
  }
  const xStep = niceStep(span[1] - span[0], 6);
  for (let v = Math.ceil(span[0] / xStep) * xStep; v <= span[1] + 1e-9; v += xStep)
    paper.text(label(v, xStep), px(v) - 20, top + height + 4, {
      width: 40,
      align: 'center',
      lineBreak: false,
    });
  paper.text('time, s', left, top + height + 14, { width, align: 'center', lineBreak: false });
  paper.lineWidth(0.8).strokeColor(INK).dash(1, { space: 2 });
  for (const at of [limit, -limit])
    paper
      .moveTo(left, py(at))
      .lineTo(left + width, py(at))
      .stroke();
  for (const { x, y, dashed } of series) {
    paper.lineWidth(1.1).strokeColor(INK);
    if (dashed) paper.dash(4, { space: 2.5 });
    else paper.undash();
    for (let i = 0; i < x.length; i++)
      if (i === 0) paper.moveTo(px(x[0]!), py(y[0]!));
      else paper.lineTo(px(x[i]!), py(y[i]!));
    paper.stroke();
  }
  paper.undash();
}

/** The drift plot: K/K₀ against α/α₀, logarithmic, with the tolerance box and the mark. */
export function drawDrift(
  paper: Paper,
  box: Box,
  drift: { gainRatio: number; poleRatio: number; gainPct: number; polePct: number },
): void {
  const side = Math.min(box.width - 30, box.height - 26);
  const left = box.x + 26;
  const reach =
    1.15 *
    Math.max(
      ...[drift.gainRatio, drift.poleRatio].map((ratio) => Math.abs(Math.log(ratio))),
      Math.log(1 + drift.gainPct / 100),
      Math.log(1 + drift.polePct / 100),
      Math.log(1.3),
    );
  const at = (ratio: number): number => (side * (Math.log(ratio) + reach)) / (2 * reach);
  const px = (gain: number): number => left + at(gain);
  const py = (pole: number): number => box.y + side - at(pole);
  paper.lineWidth(0.6).strokeColor(RULE).rect(left, box.y, side, side).stroke();
  paper
    .moveTo(px(1), box.y)
    .lineTo(px(1), box.y + side)
    .stroke();
  paper
    .moveTo(left, py(1))
    .lineTo(left + side, py(1))
    .stroke();
  const [g, p] = [1 + drift.gainPct / 100, 1 + drift.polePct / 100];
  paper
    .lineWidth(1)
    .strokeColor(INK)
    .rect(px(1 / g), py(p), px(g) - px(1 / g), py(1 / p) - py(p))
    .stroke();
  paper.circle(px(drift.gainRatio), py(drift.poleRatio), 3.2).fillColor(INK).fill();
  paper.font('regular').fontSize(LABEL).fillColor(SOFT);
  paper.text('K / K at baseline', left, box.y + side + 4, { width: side, align: 'center', lineBreak: false });
  paper.save().rotate(-90, { origin: [box.x + 12, box.y + side] });
  paper.text('α / α at baseline', box.x + 12, box.y + side, {
    width: side,
    align: 'center',
    lineBreak: false,
  });
  paper.restore();
}

/** The λ ruler: one logarithmic bar, the allowed interval filled, each limit a named tick, the chosen λ a mark. */
export function drawRuler(
  paper: Paper,
  box: Box,
  ruler: {
    allowed: { low: number; high: number } | null;
    lambda: number | null;
    limits: { name: string; lambda: number }[];
  },
): void {
  const all = [...ruler.limits.map(({ lambda }) => lambda), ...(ruler.lambda ? [ruler.lambda] : [])];
  if (all.length === 0) return;
  const from = Math.min(...all) / 1.5;
  const to = Math.max(...all) * 1.5;
  const px = (v: number): number =>
    box.x + (box.width * Math.log(Math.min(to, Math.max(from, v)) / from)) / Math.log(to / from);
  const bar = box.y + box.height - 24;
  paper
    .rect(box.x, bar - 3, box.width, 6)
    .fillColor('#E4E0D6')
    .fill();
  if (ruler.allowed)
    paper
      .rect(px(ruler.allowed.low), bar - 3, px(ruler.allowed.high) - px(ruler.allowed.low), 6)
      .fillColor('#8F9AA5')
      .fill();
  // From right to left, so that no tick runs through the name of another.
  const starts: number[] = [];
  paper.font('regular').fontSize(LABEL);
  for (const { name, lambda } of [...ruler.limits].sort((a, b) => b.lambda - a.lambda)) {
    const text = `${name} ${lambda.toPrecision(3)}`;
    const width = paper.widthOfString(text) + 8;
    const start = Math.min(px(lambda), box.x + box.width - width);
    let row = starts.findIndex((next) => start + width <= next);
    if (row < 0) row = starts.length;
    starts[row] = start;
    const y = bar - 14 - row * 10;
    paper
      .lineWidth(0.8)
      .strokeColor(SOFT)
      .moveTo(px(lambda), y + 8)
      .lineTo(px(lambda), bar + 3)
      .stroke();
    paper.fillColor(SOFT).text(text, start, y, { lineBreak: false });
  }
  if (ruler.lambda) {
    paper
      .lineWidth(2.2)
      .strokeColor(INK)
      .moveTo(px(ruler.lambda), bar - 8)
      .lineTo(px(ruler.lambda), bar + 8)
      .stroke();
    paper.fillColor(INK).text(`λ ${ruler.lambda.toFixed(1)} rad/s`, px(ruler.lambda) - 40, bar + 11, {
      width: 80,
      align: 'center',
      lineBreak: false,
    });
  }
}
