import { once } from 'node:events';
import { existsSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { request as httpRequest, type ClientRequest } from 'node:http';
import { join } from 'node:path';
import { ConfigService } from '@nestjs/config';
import request from 'supertest';
import { gzipSync } from 'node:zlib';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { CaptureQueue } from '../../src/captures/capture-queue.service.js';
import { Capture } from '../../src/captures/capture.entity.js';
import { readCsvRecord } from '../../src/captures/csv-record.js';
import type { CaptureDto } from '../../src/captures/dto/capture.dto.js';
import { Axis } from '../../src/fleet/axis.entity.js';
import type { ProblemDto } from '../../src/problem.filter.js';
import { SampleRecorder } from '../../src/telemetry/sample-recorder.js';
import { randomAxis, TestAxis } from '../identification/test-axis.js';
import { DEMO_PASSWORD, startService, until, type Service } from '../support/start-service.js';

const TRACE = readFileSync(new URL('../references/traces/o8_delayed.csv', import.meta.url));
const MAPPING = { time: 'time_s', target: 'target_mm', position: 'position_mm', output: 'output_pct' };

let service: Service;
let folder: string;
beforeAll(async () => {
  service = await startService();
  folder = join(service.app.get(ConfigService).get<string>('DATA_DIR')!, 'captures');
});
afterAll(() => service?.close());

const upload = async (
  content: Buffer | string,
  {
    who = 'technician',
    name = 'axis.csv',
    mapping = MAPPING as object | string,
    axisId = undefined as number | undefined,
  } = {},
) => {
  const caller = await service.as(who);
  const request = caller
    .post('/api/v1/captures')
    .field('mapping', typeof mapping === 'string' ? mapping : JSON.stringify(mapping));
  if (axisId !== undefined) void request.field('axisId', String(axisId));
  return request.attach('file', Buffer.from(content as string), name);
};
const get = async (id: number, who = 'technician'): Promise<CaptureDto> =>
  (await (await service.as(who)).get(`/api/v1/captures/${id}`).expect(200)).body as CaptureDto;
const ended = (id: number): Promise<CaptureDto> =>
  until('the capture is worked out', async () => {
    const capture = await get(id);
    return capture.status === 'done' || capture.status === 'failed' ? capture : null;
  });
const stored = (): number =>
  readdirSync(folder, { recursive: true }).filter((name) => name !== 'incoming').length;

/** A short record of a simulated axis as CSV, with what is done to its text. */
function simulated(change: (rows: string[][]) => string[][] = (rows) => rows, join = ','): string {
  const { setup } = randomAxis(4, { dwell: 0.2 });
  const { position, output, sampleTime, resolution } = new TestAxis(setup).run(6);
  const rows = Array.from(position, (counts, k) => [
    (k * sampleTime).toFixed(4),
    (counts * resolution).toFixed(4),
    (output[k]! / 100).toFixed(2),
  ]);
  return [['t', 'y', 'u'], ...change(rows)].map((row) => row.join(join)).join('\r\n');
}
const SHORT = { time: 't', position: 'y', output: 'u' };

describe('an uploaded capture', () => {
  test('is identified in the background; result, trace and downloads agree with the file', async () => {
    const { body } = await upload(TRACE, { name: '../../etc/o8_delayed.csv' });
    const { id } = body as { id: number };
    const capture = await ended(id);
    expect(capture).toMatchObject({
      status: 'done',
      fileName: 'o8_delayed.csv',
      samples: 20_000,
      createdBy: expect.any(String),
      identification: { verdict: 'usable', remarks: [] },
    });
    expect(capture.sampleTime).toBeCloseTo(0.001, 9);
    expect(capture.duration).toBeCloseTo(19.999, 6);
    const { gain, pole, deadTime, fitPct } = capture.identification!;
    expect(gain!.value).toBeCloseTo(10.9, 1);
    expect(gain!.low).toBeLessThan(gain!.value);
    expect(pole!.value).toBeCloseTo(38, 1);
    expect(deadTime).toBeCloseTo(0.003, 4);
    expect(fitPct).toBeGreaterThan(95);

    const caller = await service.as('viewer');
    const { body: trace } = await caller.get(`/api/v1/captures/${id}/trace?points=400`).expect(200);
    const { time, velocity, simulatedVelocity } = trace as Record<string, (number | null)[]>;
    expect(time!.length).toBeGreaterThan(300);
    expect(time!.length).toBeLessThan(450);
    expect(simulatedVelocity!.some((v) => v !== null)).toBe(true);
    expect(velocity!.length).toBe(time!.length);
    const csv = (await caller.get(`/api/v1/captures/${id}/trace.csv`).expect(200)).text.trim().split('\r\n');
    expect(csv).toHaveLength(20_001);
    const fifth = TRACE.toString().split('\n')[6]!.trim().split(',').map(Number);
    expect(csv[6]!.split(',').slice(0, 4).map(Number)).toEqual(
      fifth.map((value) => expect.closeTo(value, 4) as unknown),
    );
    const { body: json } = await caller.get(`/api/v1/captures/${id}/trace.json`).expect(200);
    const samples = json as Record<string, (number | null)[]>;
    expect(Object.values(samples).map(({ length }) => length)).toEqual(Array(7).fill(20_000));
    expect([samples.time![5], samples.position![5]]).toEqual([0.005, Number(csv[6]!.split(',')[2])]);
    const result = (await caller.get(`/api/v1/captures/${id}/result.csv`).expect(200)).text;
    expect(result).toContain(`gain,${gain!.value},${gain!.low},${gain!.high},(mm/s)/%`);
    // The upload itself is gone; the trace stays.
    expect(existsSync(join(folder, `${id}.samples`))).toBe(false);
    expect(existsSync(join(folder, `${id}.trace`))).toBe(true);
    expect(readdirSync(join(folder, 'incoming'))).toEqual([]);
  });

  test.each([
    [
      'semicolons and decimal commas',
      simulated((rows) => rows.map((r) => r.map((c) => c.replace('.', ','))), ';'),
      SHORT,
    ],
    ['a byte-order mark and quotes', `\uFEFF${simulated().replace('t,y,u', '"t","y","u"')}`, SHORT],
    [
      'other units',
      simulated((rows) =>
        rows.map(([t, y, u]) => [
          String(Math.round(Number(t) * 1e6)),
          String(Number(y) / 1000),
          String(Number(u) / 10),
        ]),
      ),
      { ...SHORT, units: { time: 'us', position: 'm', output: 'volts10' } },
    ],
    ['UTF-16', Buffer.concat([Buffer.from([0xff, 0xfe]), Buffer.from(simulated(), 'utf16le')]), SHORT],
  ])('with %s says the same', async (_what, content, mapping) => {
    const { body } = await upload(content, { mapping });
    const { status, identification, problem } = await ended((body as { id: number }).id);
    expect(problem).toBeUndefined();
    expect(status).toBe('done');
    const truth = randomAxis(4);
    expect(identification!.gain!.value / truth.gain).toBeCloseTo(1, 2);
    expect(identification!.pole!.value / truth.pole).toBeCloseTo(1, 1);
  });

  test('missing rows and uneven times are said and worked with', async () => {
    const holes = simulated((rows) => rows.filter((_, k) => k % 50 !== 7));
    const uneven = simulated((rows) =>
      rows.map(([t, y, u], k) => [String(Number(t) + (k % 3 === 0 ? 0.0009 : 0)), y!, u!]),
    );
    const first = await ended(((await upload(holes, { mapping: SHORT })).body as { id: number }).id);
    expect(first.identification!.remarks).toContainEqual(
      expect.stringMatching(/^\d+ of \d+ samples are missing$/),
    );
    const second = await ended(((await upload(uneven, { mapping: SHORT })).body as { id: number }).id);
    expect(second.status).toBe('done');
    expect(second.identification!.remarks).toContainEqual(
      expect.stringMatching(/^the sample times are uneven/),
    );
  });
});

describe('a file that cannot be used', () => {
  test.each([
    ['empty', '', /is empty/],
    ['packed, whatever its name', gzipSync('t,y,u\n1,2,3'), /packed/],
    ['a zip', Buffer.from('PK\u0003\u0004 and so on'), /packed/],
    ['binary', Buffer.from([1, 2, 0, 0, 7, 9, 0, 1, 2, 3]), /binary/],
    ['one column', 't\n1\n2\n', /one column/],
    ['without a header', '0,1,2\n1,2,3\n', /names of the columns/],
  ])('%s: refused at once, nothing is stored', async (_what, content, message) => {
    const before = stored();
    const { status, body } = await upload(content, { mapping: SHORT });
    expect(status).toBe(400);
    expect((body as ProblemDto).errors).toEqual([
      { path: 'file', message: expect.stringMatching(message) as string },
    ]);
    expect(stored()).toBe(before);
  });

  test('a column that is not there, a mapping that is none', async () => {
    const wrong = await upload(simulated(), { mapping: { ...SHORT, position: 'pos' } });
    expect(wrong.status).toBe(400);
    expect((wrong.body as ProblemDto).errors).toEqual([
      {
        path: 'mapping.position',
        message: 'there is no column "pos" for position; the file has "t", "y", "u"',
      },
    ]);
    for (const [mapping, path] of [
      ['{', 'mapping'],
      ['[1]', 'mapping'],
      ['{"time":"t","position":"y"}', 'mapping.output'],
      [JSON.stringify({ ...SHORT, units: { time: 'h' } }), 'mapping.units.time'],
    ] as const) {
      const { status, body } = await upload(simulated(), { mapping });
      expect(status).toBe(400);
      expect((body as ProblemDto).errors!.map((error) => error.path)).toContain(path);
    }
    expect(readdirSync(join(folder, 'incoming'))).toEqual([]);
  });

  test.each([
    [
      'text in a number column',
      simulated((rows) => rows.map((r, k) => (k === 100 ? [r[0]!, 'fast', r[2]!] : r))),
      /^row 102, column "y": "fast" is not a number$/,
    ],
    [
      'a row too short',
      simulated((rows) => rows.map((r, k) => (k === 10 ? r.slice(0, 2) : r))),
      /^row 12 has 2 columns, the header has 3$/,
    ],
    [
      'time going back',
      simulated((rows) => rows.map((r, k) => (k === 20 ? ['0', r[1]!, r[2]!] : r))),
      /^row 22: the time does not increase/,
    ],
    [
      'a wrong time unit',
      simulated((rows) => rows.map(([t, y, u]) => [String(Number(t) * 1000), y!, u!])),
      /Is the unit of the time right\?/,
    ],
    ['too few rows', 't,y,u\n0,1,2\n0.1,2,3\n', /2 rows of samples/],
    [
      'not UTF-8',
      Buffer.concat([
        Buffer.from(`${simulated()}\r\n`),
        Buffer.from([0xff, 0xfe, 0x41, 0x2c, 0x31, 0x2c, 0x31]),
      ]),
      /not UTF-8/,
    ],
  ])('%s: failed with the reason, nothing is stored', async (_what, content, message) => {
    const { body } = await upload(content, { mapping: SHORT });
    const { id } = body as { id: number };
    const { status, problem } = await ended(id);
    expect(status).toBe('failed');
    expect(problem).toMatch(message);
    await until('its files are gone', () => !readdirSync(folder).some((name) => name.startsWith(`${id}.`)));
  });

  test('no motion and a constant output are said by the verdict', async () => {
    const still = simulated((rows) => rows.map(([t]) => [t!, '5', '1']));
    const { identification } = await ended(
      ((await upload(still, { mapping: SHORT })).body as { id: number }).id,
    );
    expect(identification).toMatchObject({
      verdict: 'unidentifiable',
      gain: null,
      remarks: ['the axis never moves in this record', 'the output never changes'],
    });
  });
});

describe('a large upload', () => {
  /** Begins the upload of a file and sends so many megabytes of it. */
  async function begin(megabytes: number): Promise<{ sending: ClientRequest; answer: Promise<number> }> {
    const { body } = await request(service.url)
      .post('/api/v1/auth/sign-in')
      .send({ email: 'technician@tarnwick.example', password: DEMO_PASSWORD })
      .expect(200);
    const sending = httpRequest(`${service.url}/api/v1/captures`, {
      method: 'POST',
      headers: {
        authorization: `Bearer ${(body as { accessToken: string }).accessToken}`,
        'content-type': 'multipart/form-data; boundary=edge',
      },
    });
    const answer = new Promise<number>((done) => {
      sending.on('response', (response) => done(response.statusCode!));
      sending.on('error', () => done(0));
    });
    sending.write(
      `--edge\r\nContent-Disposition: form-data; name="mapping"\r\n\r\n${JSON.stringify(SHORT)}\r\n` +
        '--edge\r\nContent-Disposition: form-data; name="file"; filename="long.csv"\r\n\r\nt,y,u\r\n',
    );
    const megabyte = Buffer.alloc(1 << 20, '0.001,2.5,10.25\r\n');
    for (let sent = 0; sent < megabytes && !sending.destroyed; sent++)
      if (!sending.write(megabyte))
        await Promise.race([once(sending, 'drain').catch(() => undefined), answer]);
    return { sending, answer };
  }
  const kept = (): Promise<number> => service.dataSource.getRepository(Capture).count();
  const incoming = (): string[] => readdirSync(join(folder, 'incoming'));

  test('of more than 200 MB is refused with 413; nothing is stored', async () => {
    const before = await kept();
    const { sending, answer } = await begin(201);
    sending.end('\r\n--edge--\r\n');
    expect(await answer).toBe(413);
    await until('the upload is gone', () => incoming().length === 0);
    expect(await kept()).toBe(before);
  });

  test('whose connection breaks leaves nothing', async () => {
    const before = await kept();
    const { sending } = await begin(2);
    await until('it is coming in', () => incoming().length > 0);
    sending.destroy();
    await until('the upload is gone', () => incoming().length === 0);
    expect(await kept()).toBe(before);
  });

  test('of more rows than are read is refused at the first row too many', async () => {
    const path = join(folder, 'incoming', 'rows.csv');
    writeFileSync(path, simulated());
    try {
      await expect(readCsvRecord(path, SHORT, 1000)).rejects.toThrow(
        'the file has more than 1,000 rows: cut it into shorter captures',
      );
    } finally {
      rmSync(path);
    }
  });
});

describe('who may what', () => {
  test('a viewer sees and does not upload; an administrator neither; others’ sites do not exist', async () => {
    expect((await upload(simulated(), { who: 'viewer', mapping: SHORT })).status).toBe(403);
    expect((await upload(simulated(), { who: 'admin', mapping: SHORT })).status).toBe(403);
    await service.addPerson('only-kiln', [{ siteId: service.siteIds[1], role: 'engineer' }]);
    const { body } = await upload(simulated(), { mapping: SHORT });
    const { id } = body as { id: number };
    await ended(id);
    const stranger = await service.as('only-kiln');
    for (const path of ['', '/trace', '/trace.csv', '/trace.json', '/result.csv'])
      await stranger.get(`/api/v1/captures/${id}${path}`).expect(404);
    await stranger.post(`/api/v1/captures/${id}/baseline`).send({}).expect(404);
    const { body: list } = await stranger.get('/api/v1/captures').expect(200);
    expect((list as { items: unknown[] }).items).toEqual([]);
    expect(readdirSync(join(folder, 'incoming'))).toEqual([]);
  });

  test('an engineer takes a usable capture as the baseline of its axis, in the record', async () => {
    const axis = await service.dataSource.getRepository(Axis).findOneByOrFail({ siteId: service.siteIds[0] });
    const { body } = await upload(TRACE, { axisId: axis.id });
    const { id } = body as { id: number };
    await ended(id);
    await (await service.as('technician')).post(`/api/v1/captures/${id}/baseline`).send({}).expect(403);
    await (await service.as('engineer')).post(`/api/v1/captures/${id}/baseline`).send({}).expect(204);
    const { baseline } = await service.dataSource.getRepository(Axis).findOneByOrFail({ id: axis.id });
    expect(baseline!.gain).toBeCloseTo(10.9, 1);
    const { body: record } = await (
      await service.as('engineer')
    )
      .get(`/api/v1/audit?subjectType=axis&subjectId=${axis.id}`)
      .expect(200);
    expect((record as { items: { action: string; note: string }[] }).items[0]).toMatchObject({
      action: 'axis.baseline-confirmed',
      note: `capture ${id}, axis.csv`,
    });
  });

  test('lists are paged newest first and by axis', async () => {
    const caller = await service.as('technician');
    const { body: first } = await caller.get('/api/v1/captures?limit=2').expect(200);
    const { items, nextCursor } = first as { items: CaptureDto[]; nextCursor: string };
    expect(items).toHaveLength(2);
    expect(items[0]!.id).toBeGreaterThan(items[1]!.id);
    const { body: second } = await caller.get(`/api/v1/captures?limit=2&cursor=${nextCursor}`).expect(200);
    expect((second as { items: CaptureDto[] }).items[0]!.id).toBeLessThan(items[1]!.id);
    await caller.get('/api/v1/captures?cursor=x').expect(400);
  });
});

describe('the queue', () => {
  const queued = (recorded: boolean) =>
    service.dataSource.getRepository(Capture).save({
      siteId: service.siteIds[0],
      axisId: null,
      source: 'upload' as const,
      alertId: null,
      createdAt: new Date(),
      createdById: null,
      fileName: 'o8_delayed.csv',
      status: recorded ? ('running' as const) : ('queued' as const),
      problem: null,
      mapping: MAPPING,
      recorded,
      samples: null,
      sampleTime: null,
      duration: null,
      result: null,
    });

  test('what a restart interrupted is worked out; a recording that it cut off is said to be', async () => {
    const interrupted = await queued(true);
    writeFileSync(join(folder, `${interrupted.id}.samples`), TRACE);
    const cut = await queued(false);
    await service.app.get(CaptureQueue).onApplicationBootstrap();
    expect((await ended(interrupted.id)).status).toBe('done');
    expect(await ended(cut.id)).toMatchObject({
      status: 'failed',
      problem: expect.stringContaining('restarted') as string,
    });
  });

  test('a waiting or running capture can be cancelled and leaves nothing; a done one cannot', async () => {
    const answers = await Promise.all([upload(TRACE), upload(TRACE), upload(TRACE)]);
    const ids = answers.map(({ body }) => (body as { id: number }).id);
    const caller = await service.as('technician');
    const { body } = await caller.post(`/api/v1/captures/${ids[2]}/cancel`).expect(200);
    expect(body).toMatchObject({
      status: 'failed',
      problem: expect.stringMatching(/^Cancelled by /) as string,
    });
    expect((await ended(ids[0]!)).status).toBe('done');
    expect((await ended(ids[1]!)).status).toBe('done');
    expect(readdirSync(folder).some((name) => name.startsWith(`${ids[2]}.`))).toBe(false);
    await caller.post(`/api/v1/captures/${ids[0]}/cancel`).expect(409);
    await caller.delete(`/api/v1/captures/${ids[0]}`).expect(204);
    await caller.get(`/api/v1/captures/${ids[0]}`).expect(404);
    expect(existsSync(join(folder, `${ids[0]}.trace`))).toBe(false);
  });
});

test('samples around an alert and on demand are kept with what was before', async () => {
  const recorder = new SampleRecorder();
  const block = (second: number) => ({
    startUs: second * 1e6,
    sampleTimeUs: 10_000,
    target: new Int32Array(100).fill(second),
    position: new Int32Array(100).fill(second),
    output: new Int16Array(100).fill(second),
  });
  const push = (second: number): void =>
    recorder.push(7, { ...block(second), axisIndex: 0, motionEnabled: true, gapBefore: false } as never);
  for (let second = 1; second <= 30; second++) push(second);
  const around = recorder.record(7, 10, 5, 60);
  const demand = recorder.record(7, 0, 2, 60);
  for (let second = 31; second <= 40; second++) push(second);
  expect((await around).map(({ startUs }) => startUs / 1e6)).toEqual([
    21, 22, 23, 24, 25, 26, 27, 28, 29, 30, 31, 32, 33, 34, 35,
  ]);
  expect((await demand).map(({ startUs }) => startUs / 1e6)).toEqual([31, 32]);
  // A block from the future does not keep the past for ever.
  push(1e6);
  for (let second = 41; second <= 80; second++) push(second);
  const later = recorder.record(7, 60, 1, 60);
  push(81);
  expect((await later).map(({ startUs }) => startUs / 1e6)).toEqual([
    69, 70, 71, 72, 73, 74, 75, 76, 77, 78, 79, 80, 81,
  ]);
});
