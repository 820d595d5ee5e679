import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { beforeEach, describe, expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import { Component as BenchPage } from '../src/features/bench/bench-page';
import { benchStart, patternOf, readBench, writeBench } from '../src/features/bench/bench-state';
import { axisOf } from './axis-of';
import { refusal, serviceOfTests, showPage } from './show-page';

type Answer = Schemas['DesignAnswerDto'];
type Question = Schemas['DesignRequestDto'];

const curve = { magnitudeDb: [20, 0, -20], phaseDeg: [-120, -100, -95] };

/** An answer that carries the question's λ where a test can see it. */
function answerTo({ pattern, gains }: Question): Answer {
  const lambda = pattern?.lambda ?? 0;
  const time = [0, 0.5, 1];
  return {
    gains: gains ? { kv: 0, ka: 0, ...gains } : { kp: lambda, ki: 2, kd: 3, kv: 0, ka: 0 },
    closedLoop: {
      poles: [-20, -20, -20].map((re) => ({ re, im: 0 })),
      zeros: [{ re: -7, im: 0 }],
      bandwidthHz: 4,
      peakDb: 1.5,
      peakHz: 2,
    },
    step: { overshootPct: 24.9, peakTime: 0.1, undershootPct: null, riseTime: 0.05, settlingTime: 0.3 },
    errors: { ramp: 0, acceleration: 0.01 },
    margins: {
      gainCrossovers: [{ frequencyHz: 5, phaseMarginDeg: 62, delayMargin: 0.03 }],
      gainMarginHighDb: null,
      gainMarginLowDb: -12,
      phaseMarginDeg: 62,
      gainCrossoverHz: 5,
      phaseCrossoverHz: 2,
      maxSensitivity: 1.2,
      maxSensitivityHz: 8,
      delayMargin: 0.03,
    },
    frequencyResponse: { frequencyHz: [1, 5, 10], openLoop: curve, closedLoop: curve },
    sampled: {
      poles: [],
      equivalentPoles: [{ re: -18, im: 2 }],
      spectralRadius: 0.9,
      stable: true,
      damping: 0.8,
      maxStableSampleTime: 0.02,
      outputRippleRms: 0.2,
      maxSensitivity: 1.3,
      maxSensitivityHz: 9,
    },
    move: {
      peakFollowingError: 0.4,
      rmsFollowingError: 0.2,
      saturatedPct: 0,
      overshoot: 0,
      peakOutput: 40,
      trace: {
        time,
        target: [0, 5, 10],
        position: [0, 4, 10],
        velocity: [0, 9, 0],
        output: [0, 40, 2],
        integrator: [1, 2, 2],
      },
    },
    ...(pattern && { remarks: [`tried at ${lambda}`] }),
  };
}

const limits: Schemas['BindingDto'] = {
  lambda: 20,
  commissionedLambda: 20,
  kept: true,
  upper: { name: 'sensitivity', lambda: 50 },
  lower: { name: 'following-error', lambda: 10 },
  allowed: { low: 10, high: 50 },
  limits: [
    { name: 'sensitivity', side: 'upper', lambda: 50 },
    { name: 'following-error', side: 'lower', lambda: 10 },
  ],
  searched: { low: 2, high: 200 },
  reason: 'λ stays.',
  waysOut: [],
};

const service = serviceOfTests();
const show = (search = '', role: 'engineer' | 'technician' = 'engineer', axis = axisOf({})): void => {
  service.current.on('GET /api/v1/axes/3', () => ({ status: 200, body: axis }));
  showPage(BenchPage, `/axes/3/bench${search}`, role, '/axes/:id/bench');
};
beforeEach(() => {
  service.current.on('POST /api/v1/design', (body) => ({ status: 200, body: answerTo(body as Question) }));
  service.current.on('POST /api/v1/design/limits', () => ({ status: 200, body: limits }));
});
const tried = (): Question[] =>
  (service.current.bodies('POST /api/v1/design') as Question[]).filter(({ gains }) => !gains);

describe('bench', () => {
  test('starts as the axis runs, on the plant as identified, and compares with today’s gains', async () => {
    show();
    expect(await screen.findByText('tried at 20')).toBeInTheDocument();
    expect(tried()[0]).toMatchObject({
      plant: { gain: 16.1, pole: 12.8, coulomb: 1.5, deadTime: 0.002 },
      structure: 'PI-D',
      pattern: { kind: 'triple', lambda: 20 },
      feedForward: true,
      move: { distance: 600, duration: 1.2, profile: 'raised-cosine', holding: true },
    });
    expect(service.current.bodies('POST /api/v1/design')).toContainEqual(
      expect.objectContaining({ gains: axisOf({}).gains }),
    );
    expect(
      await screen.findByText(
        'λ = 20.0 is allowed from 10.0 to 50.0 rad/s: following error binds below, sensitivity Ms above.',
      ),
    ).toBeInTheDocument();
    const row = screen.getByRole('row', { name: /^Kp/ });
    await waitFor(() =>
      expect(
        within(row)
          .getAllByRole('cell')
          .map((cell) => cell.textContent),
      ).toEqual(['Kp, %/mm', '5.78', '20.0']),
    );
    expect(
      screen.getByText('gain crossover: phase margin 62.0°, delay margin 30.0 ms', { exact: false }),
    ).toBeVisible();
  });

  test('λ goes by arrow and page keys; beyond a limit it says which one forbids it', async () => {
    show();
    const slider = await screen.findByRole('slider', { name: /^λ in rad\/s/ });
    await screen.findByText(/binds below/);
    slider.focus();
    await userEvent.keyboard('{ArrowRight}');
    await waitFor(() => expect(tried().at(-1)!.pattern!.lambda).toBeCloseTo(20.19, 1));
    await userEvent.keyboard('{PageUp}{PageUp}{PageUp}{PageUp}{PageUp}{PageUp}');
    expect(
      await screen.findByText(/is too fast: sensitivity Ms forbids it; allowed from 10\.0 to 50\.0/),
    ).toBeVisible();
    await userEvent.keyboard('{Home}');
    expect(await screen.findByText(/is too slow: following error forbids it/)).toBeVisible();
    // What the λ is changes no limit: they are asked for once.
    expect(service.current.bodies('POST /api/v1/design/limits')).toHaveLength(1);
  });

  test('of two answers the newest question’s is shown, whichever comes last', async () => {
    show();
    await screen.findByText('tried at 20');
    const field = screen.getByRole('textbox', { name: 'λ, rad/s' });
    const honest = service.current.fetch;
    let release: () => void = () => undefined;
    const late = new Promise<void>((done) => (release = done));
    globalThis.fetch = (async (request: Request) => {
      const asked = request.clone();
      const answer = await honest(request);
      if (asked.url.endsWith('/design') && (await asked.text()).includes('"lambda":30')) await late;
      return answer;
    }) as typeof fetch;
    await userEvent.clear(field);
    await userEvent.type(field, '30');
    await userEvent.clear(field);
    await userEvent.type(field, '40');
    expect(await screen.findByText('tried at 40')).toBeInTheDocument();
    release();
    await new Promise((done) => setTimeout(done, 50));
    expect(screen.getByText('tried at 40')).toBeInTheDocument();
    expect(screen.queryByText('tried at 30')).toBeNull();
  });

  test('a link holds the whole state', async () => {
    const start = benchStart(axisOf({}));
    const state = {
      ...start,
      lambda: 33.3,
      kind: 'real',
      spread: 2,
      structure: 'PID',
      feedForward: false,
      plant: 'baseline',
      profile: 'step',
      step: 0.5,
    } as const;
    expect(readBench(start, writeBench(state))).toEqual(state);
    expect(patternOf(state)).toEqual({ kind: 'real', poles: [16.65, 33.3, 66.6] });
    show(`?${writeBench(state)}`);
    await waitFor(() => expect(tried().length).toBeGreaterThan(0));
    expect(tried().at(-1)).toMatchObject({
      plant: { gain: 16, pole: 12.9 },
      structure: 'PID',
      feedForward: false,
      pattern: { kind: 'real', poles: [16.65, 33.3, 66.6] },
      move: { profile: 'step', distance: 0.5 },
    });
    expect(await screen.findByRole('radio', { name: 'step' })).toBeChecked();
  });

  test('what a link says wrongly is left as the axis runs', () => {
    const start = benchStart(axisOf({}));
    expect(
      readBench(start, new URLSearchParams('lambda=-4&poles=fast&structure=PD&step=x&spread=0')),
    ).toEqual(start);
  });

  test('an engineer proposes what is tried; a technician only tries', async () => {
    service.current.on('POST /api/v1/proposals', () => refusal(409, 'A proposal for this axis is open.'));
    show('?lambda=25');
    await userEvent.click(await screen.findByRole('button', { name: 'Propose these gains' }));
    expect(await screen.findByRole('alert')).toHaveTextContent('A proposal for this axis is open.');
    expect(service.current.bodies('POST /api/v1/proposals')).toEqual([
      { axisId: 3, structure: 'PI-D', feedForward: true, pattern: { kind: 'triple', lambda: 25 } },
    ]);
  });

  test('a technician may try and not propose', async () => {
    show('', 'technician');
    expect(await screen.findByText('tried at 20')).toBeInTheDocument();
    expect(screen.queryByRole('button', { name: 'Propose these gains' })).toBeNull();
  });

  test('an axis without estimate and baseline is told what to do first', async () => {
    show('', 'engineer', axisOf({ estimate: null, baseline: null }));
    expect(await screen.findByText(/The bench needs a plant/)).toBeInTheDocument();
    expect(service.current.bodies('POST /api/v1/design')).toEqual([]);
  });
});
