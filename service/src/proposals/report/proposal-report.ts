import { readFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import PDFDocument from 'pdfkit';
import type { ChecklistItem } from '../checklist.js';
import { lambdaOf, type ExpectedFigures } from '../evidence.js';
import type { Proposal } from '../proposal.entity.js';
import { drawDrift, drawLines, drawRuler } from './paper-charts.js';

/** A font with Greek letters; PDF's own fonts have none. */
const font = (name: string): Buffer =>
  readFileSync(createRequire(import.meta.url).resolve(`dejavu-fonts-ttf/ttf/${name}.ttf`));
const REGULAR = font('DejaVuSansCondensed');
const BOLD = font('DejaVuSansCondensed-Bold');

const MARGIN = 42;
/** A4, pt. */
const WIDTH = 595.28;
const HEIGHT = 841.89;
const INNER = WIDTH - 2 * MARGIN;
const INK = '#1C2733';
const SOFT = '#5B6672';
const RULE = '#B9B4A7';

const LIMIT_WORDS: Record<string, string> = {
  'output-headroom': 'output headroom',
  'output-ripple': 'output ripple',
  'sampled-damping': 'sampling',
  sensitivity: 'sensitivity Ms',
  'following-error': 'following error',
};

const GAINS = [
  ['kp', 'Kp, %/mm'],
  ['ki', 'Ki, %/(mm·s)'],
  ['kd', 'Kd, %·s/mm'],
  ['kv', 'Kv, %·s/mm'],
  ['ka', 'Ka, %·s²/mm'],
] as const;

const FIGURES: [keyof ExpectedFigures, string, number][] = [
  ['peakFollowingError', 'peak following error, mm', 3],
  ['rmsFollowingError', 'RMS following error, mm', 3],
  ['peakOutput', 'peak output, %', 1],
  ['saturatedPct', 'output at its limit, % of the move', 1],
  ['maxSensitivity', 'maximum sensitivity Ms', 2],
];

const SIGN_OFFS: [action: string, label: string][] = [
  ['drafted', 'Drafted'],
  ['altered', 'Last altered'],
  ['sent for review', 'Sent for review'],
  ['approved', 'Approved'],
  ['scheduled', 'Scheduled'],
  ['gains sent', 'Gains sent'],
  ['applied', 'Read back and applied'],
  ['kept', 'Kept'],
  ['rolled back', 'Rolled back'],
];

/**
 * A proposal on two sides of A4, for whoever has never opened the tool: why, probable cause, what changes on the first;
 * what to expect, what binds, sign-offs and the checklist on the second. Charts are vectors, texts are text.
 *
 * @param proposal with axis, machine, site and events
 */
export function proposalReport(proposal: Proposal, checklist: readonly ChecklistItem[]): PDFKit.PDFDocument {
  const { axis } = proposal;
  const paper = new PDFDocument({
    size: 'A4',
    margin: MARGIN,
    lang: 'en',
    displayTitle: true,
    info: { Title: `Proposal ${proposal.id}: retune ${axis.tag}`, Author: 'Polewright' },
  });
  paper.registerFont('regular', REGULAR).registerFont('bold', BOLD);
  new FirstSide(paper, proposal).draw();
  paper.addPage();
  new SecondSide(paper, proposal, checklist).draw();
  paper.end();
  return paper;
}

/** What both sides are set with. */
abstract class Side {
  protected y = MARGIN;

  constructor(
    protected readonly paper: PDFKit.PDFDocument,
    protected readonly proposal: Proposal,
  ) {}

  protected clock(at: Date): string {
    return at.toLocaleString('en-GB', {
      timeZone: this.proposal.axis.site.timeZone,
      dateStyle: 'medium',
      timeStyle: 'short',
    });
  }

  protected heading(text: string): void {
    this.y += 8;
    this.paper
      .lineWidth(0.6)
      .strokeColor(RULE)
      .moveTo(MARGIN, this.y)
      .lineTo(WIDTH - MARGIN, this.y)
      .stroke();
    this.y += 6;
    this.paper.font('bold').fontSize(11.5).fillColor(INK).text(text, MARGIN, this.y, { lineBreak: false });
    this.y += 17;
  }

  /** A paragraph that takes no more than `most` points: what is longer ends in an ellipsis, the whole is on the page. */
  protected paragraph(
    text: string,
    most = 60,
    { x = MARGIN, width = INNER, bold = false, soft = false } = {},
  ): void {
    this.paper
      .font(bold ? 'bold' : 'regular')
      .fontSize(9.5)
      .fillColor(soft ? SOFT : INK);
    const unbroken = text.replaceAll(' %', '\u00a0%');
    const height = Math.min(most, this.paper.heightOfString(unbroken, { width }));
    this.paper.text(unbroken, x, this.y, { width, height: height + 0.5, ellipsis: true });
    this.y += height + 4;
  }

  /** @param widths of the columns; the first is set left, the others right */
  protected table(head: string[], rows: string[][], widths: number[]): void {
    const line = (cells: string[], bold: boolean): void => {
      let x = MARGIN;
      cells.forEach((cell, i) => {
        this.paper
          .font(bold || i === head.length - 1 ? 'bold' : 'regular')
          .fontSize(9)
          .fillColor(bold ? SOFT : INK)
          .text(cell, x, this.y, {
            width: widths[i]! - 6,
            height: 12,
            ellipsis: true,
            align: i === 0 ? 'left' : 'right',
          });
        x += widths[i]!;
      });
      this.y += 13.5;
      this.paper
        .lineWidth(0.3)
        .strokeColor(RULE)
        .moveTo(MARGIN, this.y - 2)
        .lineTo(x - 6, this.y - 2)
        .stroke();
    };
    line(head, true);
    for (const row of rows) line(row, false);
    this.y += 4;
  }

  protected foot(side: number): void {
    const { id, version, state } = this.proposal;
    this.paper
      .font('regular')
      .fontSize(7.5)
      .fillColor(SOFT)
      .text(
        `Polewright · proposal ${id}, version ${version}, ${state} · printed ${this.clock(new Date())} · side ${side} of 2`,
        MARGIN,
        HEIGHT - MARGIN - 10,
        { width: INNER, lineBreak: false },
      );
  }
}

class FirstSide extends Side {
  draw(): void {
    const { proposal, paper } = this;
    const { axis, evidence, probableCause } = proposal;
    paper
      .font('bold')
      .fontSize(19)
      .fillColor(INK)
      .text(`Retune ${axis.tag}`, MARGIN, this.y, { lineBreak: false });
    this.y += 25;
    this.paragraph(
      `${axis.name}. ${axis.machine.name}, ${axis.site.name}. Proposal ${proposal.id}, version ${proposal.version}, ${proposal.state}; made ${this.clock(proposal.createdAt)}.`,
      26,
      { soft: true },
    );
    this.y += 4;
    this.paragraph(this.inShort(), 64, { bold: true });

    this.heading('Why');
    const top = this.y;
    const beside = { x: MARGIN + 150, width: INNER - 150 };
    const { estimate, baseline, tolerances } = evidence;
    drawDrift(
      paper,
      { x: MARGIN, y: top, width: 140, height: 136 },
      {
        gainRatio: estimate.gain.value / baseline.gain,
        poleRatio: estimate.pole.value / baseline.pole,
        gainPct: tolerances.gainPct,
        polePct: tolerances.polePct,
      },
    );
    for (const { sentence } of evidence.decisions) this.paragraph(sentence, 40, beside);
    const interval = (
      { value, low, high }: { value: number; low: number; high: number },
      unit: string,
    ): string => `${value.toPrecision(4)} (${low.toPrecision(4)} … ${high.toPrecision(4)}) ${unit}`;
    this.paragraph(
      `Plant gain K ${interval(estimate.gain, '(mm/s)/%')}: speed for each percent of output.`,
      26,
      beside,
    );
    this.paragraph(
      `Plant pole α ${interval(estimate.pole, 'rad/s')}: how quickly that speed is reached.`,
      26,
      beside,
    );
    this.paragraph(
      `At baseline K ${baseline.gain.toPrecision(4)}, α ${baseline.pole.toPrecision(4)}. In brackets: 95 % intervals, from ${estimate.movingSeconds.toFixed(0)} s of production moves. The box is the tolerance, the mark the axis.`,
      40,
      { ...beside, soft: true },
    );
    this.y = Math.max(this.y, top + 140);

    this.heading('Probable cause');
    if (probableCause) {
      this.paragraph(probableCause.sentence, 40);
      this.paragraph(
        probableCause.advice === 'inspect first'
          ? 'Inspect first. A retune around worn mechanics or weak supply hides a fault; it is a stop-gap at best.'
          : 'Retuning is the right answer if the load is meant to stay. If nobody changed it, look for what drags or is loose first.',
        28,
        { bold: probableCause.advice === 'inspect first' },
      );
    } else this.paragraph('Not judged: a person asked for this proposal; no drift was decided.', 14);
    if (proposal.note) this.paragraph(`Note: ${proposal.note}`, 52);

    this.heading('What changes');
    this.whatChanges();
    this.heading('Before anything is changed at the machine');
    this.paragraph(
      'New gains can move this axis unexpectedly. Keep people clear. Follow the site’s lockout/tagout and machine-safety procedures and local codes; only authorised and competent people, reduced speed first, the emergency stop in reach. Polewright is not a safety function. Nothing is sent before a scheduled window, an axis in maintenance and at rest, and a confirmed checklist.',
      64,
    );
    this.foot(1);
  }

  private inShort(): string {
    const { expected, proposed, noGainsReason, evidence } = this.proposal;
    if (!proposed || !expected?.after) return `No gains are proposed. ${noGainsReason ?? ''}`.trim();
    const mm = (value: number): string => value.toPrecision(3);
    return (
      `On its own ${evidence.move.distance} mm move the axis lags by up to ${mm(expected.before.peakFollowingError)} mm with today’s gains ` +
      `(allowed: ${evidence.tolerances.followingError} mm); with the proposed ones by up to ${mm(expected.after.peakFollowingError)} mm, by simulation.`
    );
  }

  private whatChanges(): void {
    const { proposed, current, noGainsReason } = this.proposal;
    if (!proposed) return this.paragraph(noGainsReason ?? 'Nothing.', 52);
    const lambda = lambdaOf(proposed.pattern);
    this.paragraph(
      `${proposed.structure} controller, ${lambda === null ? 'gains given by hand' : `${proposed.pattern!.kind} poles at λ = ${lambda.toFixed(1)} rad/s`}, feed-forward ${proposed.feedForward ? 'on' : 'off'}. Now: revision ${current.revision}, ${current.structure}${current.lambda === null ? '' : `, λ = ${current.lambda.toFixed(1)} rad/s`}.`,
      28,
    );
    this.table(
      ['Gain', 'now', 'ratio', 'proposed'],
      GAINS.map(([name, label]) => [
        label,
        current.gains[name].toPrecision(4),
        current.gains[name] === 0 ? '–' : (proposed.gains[name] / current.gains[name]).toFixed(2),
        proposed.gains[name].toPrecision(4),
      ]),
      [170, 100, 80, 110],
    );
  }
}

class SecondSide extends Side {
  constructor(
    paper: PDFKit.PDFDocument,
    proposal: Proposal,
    private readonly checklist: readonly ChecklistItem[],
  ) {
    super(paper, proposal);
  }

  draw(): void {
    const { proposal, paper } = this;
    const { expected, evidence, binding, trial } = proposal;
    this.y -= 8;
    if (expected) {
      this.heading('What to expect (simulated; today dashed, proposed solid, dotted the limit)');
      const width = (INNER - 14) / 2;
      const series = (figure: 'error' | 'output') => [
        { x: expected.before.trace.time, y: expected.before.trace[figure], dashed: true },
        ...(expected.after ? [{ x: expected.after.trace.time, y: expected.after.trace[figure] }] : []),
      ];
      const charts = [
        {
          title: 'following error',
          unit: 'mm',
          series: series('error'),
          limit: evidence.tolerances.followingError,
        },
        { title: 'output', unit: '% of full scale', series: series('output'), limit: 100 },
      ];
      charts.forEach((chart, i) =>
        drawLines(paper, { x: MARGIN + i * (width + 14), y: this.y, width, height: 150 }, chart),
      );
      this.y += 154;
      const cell = (
        figures: ExpectedFigures | null | undefined,
        name: keyof ExpectedFigures,
        digits: number,
      ): string => (figures?.[name] == null ? '–' : figures[name].toFixed(digits));
      this.table(
        ['On that move', 'do nothing', 'at worst', 'proposed, at worst', 'proposed'],
        FIGURES.map(([name, label, digits]) => [
          label,
          cell(expected.before, name, digits),
          cell(expected.worstBefore, name, digits),
          cell(expected.worst, name, digits),
          cell(expected.after, name, digits),
        ]),
        [190, 75, 75, 100, 71],
      );
    }
    if (binding) {
      this.heading('What binds');
      this.paragraph(binding.reason, 28);
      drawRuler(
        paper,
        { x: MARGIN, y: this.y, width: INNER, height: 66 },
        {
          allowed: binding.allowed,
          lambda: binding.lambda,
          limits: binding.limits.flatMap(({ name, lambda }) =>
            lambda === null ? [] : [{ name: LIMIT_WORDS[name] ?? name, lambda }],
          ),
        },
      );
      this.y += 70;
      if (binding.waysOut.length > 0) this.paragraph(`Other ways: ${binding.waysOut.join('; ')}.`, 28);
    }
    if (trial) {
      this.heading(`Trial: ${trial.verdict}`);
      this.paragraph(trial.sentence, 40);
    }
    this.heading('Sign-offs');
    this.table(
      ['Step', 'version', 'when', 'who'],
      SIGN_OFFS.flatMap(([action, label]) => {
        const event = proposal.events.findLast((found) => found.action === action);
        return event ? [[label, String(event.version), this.clock(event.at), event.by]] : [];
      }),
      [150, 60, 140, 160],
    );
    this.heading('To confirm at the machine');
    for (const { text } of this.checklist) {
      if (this.y > HEIGHT - MARGIN - 34) {
        this.paragraph('… and the further items on the page.', 12);
        break;
      }
      paper
        .lineWidth(0.8)
        .strokeColor(INK)
        .rect(MARGIN, this.y + 1.5, 7, 7)
        .stroke();
      this.paragraph(text, 12, { x: MARGIN + 13, width: INNER - 13 });
    }
    this.foot(2);
  }
}
