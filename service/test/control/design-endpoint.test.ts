import 'reflect-metadata';
import type { INestApplication } from '@nestjs/common';
import { Test } from '@nestjs/testing';
import request from 'supertest';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import type { BindingDto } from '../../src/design/dto/binding.dto.js';
import type { DesignAnswerDto } from '../../src/design/dto/design-answer.dto.js';
import { DesignModule } from '../../src/design/design.module.js';
import type { ProblemDto } from '../../src/problem.filter.js';
import { setup } from '../../src/setup.js';

const axis = {
  plant: { gain: 8, pole: 25 },
  structure: 'PI-D',
  pattern: { kind: 'triple', lambda: 40 },
  controller: { sampleTime: 0.001 },
};

let app: INestApplication;
let openApi: ReturnType<typeof setup>;

beforeAll(async () => {
  const module = await Test.createTestingModule({ imports: [DesignModule] }).compile();
  app = module.createNestApplication({ logger: false });
  openApi = setup(app);
  await app.init();
});
afterAll(() => app?.close());

const post = (body: object, below = ''): request.Test =>
  request(app.getHttpServer()).post(`/api/v1/design${below}`).send(body);

describe('POST /design', () => {
  test('answers with gains, loop, margins, response and sampled loop', async () => {
    const answer = (await post(axis).expect(200)).body as DesignAnswerDto;
    expect(answer.gains).toEqual({ kp: 24, ki: 320, kd: 0.475, kv: 0, ka: 0 });
    expect(answer.closedLoop.poles).toEqual([40, 40, 40].map((l) => ({ re: -l, im: 0 })));
    expect(answer.step.overshootPct).toBeCloseTo(500 * Math.exp(-3), 8);
    expect(answer.errors.ramp).toBe(0);
    expect(answer.margins.gainMarginHighDb).toBeNull();
    expect(answer.margins.maxSensitivity).toBe(1);
    expect(answer.frequencyResponse.frequencyHz).toHaveLength(200);
    expect(answer.frequencyResponse.frequencyHz.at(-1)).toBeCloseTo(500, 6);
    expect(answer.sampled.stable).toBe(true);
    expect(answer.sampled.maxStableSampleTime).toBeCloseTo(0.013934580391558865, 8);
    expect(answer.sampled.outputRippleRms).toBe(0);
    expect(answer.move).toBeNull();
  });

  test('simulates the move at the sample time for round((duration + settle)/T) samples', async () => {
    const move = { distance: 80, duration: 0.5, profile: 'raised-cosine' };
    const answer = (await post({ ...axis, feedForward: true, move }).expect(200)).body as DesignAnswerDto;
    expect(answer.gains.kv).toBeCloseTo(1 / 8 + 0.475, 12);
    const trace = answer.move!.trace;
    for (const column of Object.values(trace)) expect(column).toHaveLength(1500);
    expect(trace.time[1499]).toBeCloseTo(1.499, 9);
    expect(trace.target.at(-1)).toBe(80);
    expect(trace.position.at(-1)).toBeCloseTo(80, 3);
    expect(Math.max(...trace.output.map(Math.abs))).toBe(answer.move!.peakOutput);
  });

  test('analyses given gains, with the feed-forward filled in only where it was left out', async () => {
    const gains = { kp: 24, ki: 320, kd: 0.475 };
    const { pattern: _, ...bare } = axis;
    const analysed = (await post({ ...bare, gains }).expect(200)).body as DesignAnswerDto;
    expect(analysed.gains).toEqual({ ...gains, kv: 0, ka: 0 });
    const full = (await post({ ...bare, gains, feedForward: true }).expect(200)).body as DesignAnswerDto;
    expect(full.gains).toEqual({ ...gains, kv: 0.6, ka: 0.005 });
    const kept = (await post({ ...bare, gains: { ...gains, kv: 0.1 }, feedForward: true }).expect(200))
      .body as DesignAnswerDto;
    expect(kept.gains.kv).toBe(0.1);
  });

  test.each([
    ['plant.gain', { ...axis, plant: { gain: -8, pole: 25 } }],
    ['plant.gain', { ...axis, plant: { gain: '8', pole: 25 } }],
    ['plant.pole', { ...axis, plant: { gain: 8, pole: 0 } }],
    ['plant.coulomb', { ...axis, plant: { gain: 8, pole: 25, coulomb: -1 } }],
    ['plant', { ...axis, plant: undefined }],
    ['structure', { ...axis, structure: 'PD' }],
    ['pattern.kind', { ...axis, pattern: { kind: 'quadruple', lambda: 1 } }],
    ['pattern.lambda', { ...axis, pattern: { kind: 'triple', lambda: 0 } }],
    ['pattern.lambda', { ...axis, pattern: { kind: 'triple' } }],
    ['pattern.poles', { ...axis, pattern: { kind: 'real', poles: [1, 2] } }],
    ['pattern.zeta', { ...axis, pattern: { kind: 'pair', pole: 40, omega: 50 } }],
    ['pattern.omega', { ...axis, pattern: { kind: 'itae', lambda: 40 } }],
    ['pattern', { ...axis, pattern: undefined }],
    ['gains.kp', { ...axis, gains: { ki: 1, kd: 1 } }],
    ['controller.sampleTime', { ...axis, controller: { sampleTime: null } }],
    [
      'controller.outputDelaySamples',
      { ...axis, controller: { sampleTime: 0.001, outputDelaySamples: 0.5 } },
    ],
    ['move.profile', { ...axis, move: { distance: 1, duration: 1, profile: 'ramp' } }],
    ['move.duration', { ...axis, move: { distance: 1, duration: 1000, profile: 'step' } }],
    ['frequenciesHz', { ...axis, frequenciesHz: [1, -1] }],
    ['surprise', { ...axis, surprise: 1 }],
  ])('refuses a wrong %s by name', async (path, body) => {
    const response = await post(body).expect(400);
    expect(response.headers['content-type']).toContain('application/problem+json');
    expect((response.body as ProblemDto).errors?.map((e) => e.path)).toContain(path);
  });

  test('is described in the OpenAPI document, request and answer', () => {
    const operation = openApi.paths['/api/v1/design']!.post!;
    expect(JSON.stringify(operation.requestBody)).toContain('DesignRequestDto');
    expect(JSON.stringify(operation.responses['200'])).toContain('DesignAnswerDto');
  });

  test('thins the trace, starts from a held axis and says in words what matters, when asked', async () => {
    const move = { distance: 80, duration: 0.5, settle: 0.5, profile: 'raised-cosine', points: 100 };
    const plant = { gain: 8, pole: 25, bias: 3 };
    const controller = { sampleTime: 0.001, resolution: 0.001 };
    const body = { ...axis, plant, controller, structure: 'PID', remarks: true, move };
    const held = (await post({ ...body, move: { ...move, holding: true } }).expect(200))
      .body as DesignAnswerDto;
    const rest = (await post(body).expect(200)).body as DesignAnswerDto;
    expect(held.move!.trace.time).toHaveLength(100);
    expect(held.move!.trace.time[1]).toBeCloseTo(0.01, 9);
    expect(held.move!.trace.integrator[0]).toBeCloseTo(3, 1);
    expect(rest.move!.trace.integrator[0]).toBeCloseTo(0, 1);
    expect(held.remarks).toHaveLength(3);
    expect(held.remarks![0]).toBe(
      'Kd turns negative below λ = α/3 = 8.33 rad/s, where PI alone places the poles.',
    );
    const overshoot = held.step.overshootPct!.toFixed(1);
    expect(held.remarks![1]).toBe(
      `PID adds 2 zeros at −25.3 ± 5.95j rad/s: a step overshoots by ${overshoot} % although all poles are real; it follows a ramp without lag.`,
    );
    expect(held.remarks![2]).toMatch(
      /^With a resolution of 1 µm .*starts to hum \(1 %\) from λ = [\d.]+ rad\/s\.$/,
    );
    expect((await post(axis).expect(200)).body).not.toHaveProperty('remarks');
  });

  test('the λ from which it hums is where the ripple is 1 %', async () => {
    const controller = { sampleTime: 0.001, resolution: 0.001 };
    const { remarks } = (await post({ ...axis, controller, remarks: true }).expect(200))
      .body as DesignAnswerDto;
    const lambda = Number(/from λ = ([\d.]+)/.exec(remarks!.at(-1)!)![1]);
    const ripple = async (at: number): Promise<number> => {
      const pattern = { kind: 'triple', lambda: at };
      const { sampled } = (await post({ ...axis, controller, pattern }).expect(200)).body as DesignAnswerDto;
      return sampled.outputRippleRms!;
    };
    expect(await ripple(lambda * 1.01)).toBeGreaterThan(1);
    expect(await ripple(lambda * 0.98)).toBeLessThan(1);
  });

  test('a pattern slower than α/3 is said to make Kd negative', async () => {
    const pattern = { kind: 'triple', lambda: 5 };
    const { remarks, gains } = (await post({ ...axis, pattern, remarks: true }).expect(200))
      .body as DesignAnswerDto;
    expect(gains.kd).toBeLessThan(0);
    expect(remarks![0]).toMatch(/^Kd is negative: the poles add up to 15 rad\/s, less than α = 25 rad\/s\./);
  });

  test('poles of the sampled loop in s tend to the placed ones', async () => {
    const { sampled } = (await post({ ...axis, controller: { sampleTime: 1e-5 } }).expect(200))
      .body as DesignAnswerDto;
    const nearest = sampled.equivalentPoles
      .map(({ re, im }) => Math.hypot(re + 40, im))
      .sort((a, b) => a - b);
    expect(nearest[2]).toBeLessThan(4);
  });
});

describe('POST /design/limits', () => {
  const body = {
    ...axis,
    plant: { ...axis.plant, coulomb: 3, bias: 1 },
    region: { gain: { low: 7.8, high: 8.2 }, pole: { low: 23, high: 27 } },
    controller: { sampleTime: 0.001, resolution: 0.001 },
    feedForward: true,
    move: { distance: 200, duration: 1.5, profile: 'raised-cosine' },
    tolerances: { followingError: 1 },
  };
  const limits = (request: object) => post(request, '/limits');

  test('gives every limit with its bound, the allowed interval and what binds', async () => {
    const { body: answer } = await limits(body).expect(200);
    const { allowed, upper, lower, limits: all, commissionedLambda, kept } = answer as BindingDto;
    expect(all.map(({ name }) => name)).toEqual([
      'output-headroom',
      'output-ripple',
      'sampled-damping',
      'sensitivity',
      'following-error',
    ]);
    expect(commissionedLambda).toBeCloseTo(40, 9);
    expect(kept).toBe(true);
    expect(allowed!.low).toBeLessThan(40);
    expect(allowed!.high).toBeGreaterThan(40);
    expect(upper!.lambda).toBeCloseTo(allowed!.high, 9);
    expect(lower!.name).toBe('following-error');
  });

  test('says none with the reason when a tolerance cannot be kept', async () => {
    const { body: answer } = await limits({ ...body, tolerances: { followingError: 1e-6 } }).expect(200);
    expect(answer.allowed).toBeNull();
    expect(answer.lambda).toBeNull();
    expect(answer.reason).toMatch(/^No λ is left: /);
    expect(answer.waysOut.length).toBeGreaterThan(0);
  });

  test.each([
    [{ region: { gain: { low: 8 } } }, 'region.gain.high'],
    [{ tolerances: { followingError: -1 } }, 'tolerances.followingError'],
    [{ tolerances: undefined }, 'tolerances'],
    [{ move: { distance: 5, duration: 60, profile: 'step' } }, 'move.duration'],
  ])('refuses %j and names the field', async (change, path) => {
    const { body: problem } = await limits({ ...body, ...change }).expect(400);
    expect((problem as ProblemDto).errors!.map((error) => error.path)).toContain(path);
  });
});
