import 'reflect-metadata';
import type { INestApplication } from '@nestjs/common';
import { Test } from '@nestjs/testing';
import request from 'supertest';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
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

const post = (body: object): request.Test => request(app.getHttpServer()).post('/api/v1/design').send(body);

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
});
