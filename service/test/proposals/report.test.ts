import { afterAll, beforeAll, expect, test } from 'vitest';
import { niceStep } from '../../src/proposals/report/paper-charts.js';
import { startService, type Caller, type Service } from '../support/start-service.js';
import { ProposalBench, type ProposalBody } from './proposal-bench.js';

let service: Service;
let bench: ProposalBench;
let engineer: Caller;
let id: number;

beforeAll(async () => {
  service = await startService();
  await service.addPerson('elsewhere', [{ siteId: service.siteIds[1], role: 'viewer' }]);
  engineer = await service.as('engineer');
  bench = await ProposalBench.start(service, 100);
  await bench.stream(45);
  const made = await engineer
    .post('/api/v1/proposals')
    .send({ axisId: bench.axis.axisId, pattern: { kind: 'triple', lambda: 26 }, note: 'λ lower, α as it is' })
    .expect(201);
  id = (made.body as ProposalBody).id;
});
afterAll(async () => {
  bench?.gateway.close();
  await service?.close();
});

test('the report is a PDF of two A4 sides with text as text and nothing as a picture', async () => {
  const answer = await (
    await service.as('viewer')
  )
    .get(`/api/v1/proposals/${id}/report.pdf`)
    .responseType('blob')
    .expect(200);
  expect(answer.headers['content-type']).toBe('application/pdf');
  const pdf = (answer.body as Buffer).toString('latin1');
  expect(pdf.slice(0, 5)).toBe('%PDF-');
  expect(pdf.match(/\/Type \/Page\b/g)).toHaveLength(2);
  expect(pdf).toContain('/MediaBox [0 0 595.28 841.89]');
  expect(pdf).not.toContain('/Subtype /Image');
  // Both fonts are embedded with a map back to Unicode: texts can be searched and copied.
  expect(pdf.match(/\/ToUnicode/g)!.length).toBeGreaterThanOrEqual(2);
  await (await service.as('elsewhere')).get(`/api/v1/proposals/${id}/report.pdf`).expect(404);
  await engineer.get('/api/v1/proposals/99999/report.pdf').expect(404);
});

test('every version is kept with who made it; what people say changes neither version nor approval', async () => {
  const path = `/api/v1/proposals/${id}`;
  await engineer
    .patch(path)
    .set('If-Match', '"1"')
    .send({ pattern: { kind: 'triple', lambda: 24 }, note: 'Quieter still' })
    .expect(200);
  await engineer.post(`${path}/submit`).expect(200);
  await (await service.as('approver')).post(`${path}/approve`).expect(200);
  for (const text of ['', '   ', 'x'.repeat(2001), 3])
    await engineer.post(`${path}/comments`).send({ text }).expect(400);
  await (await service.as('elsewhere')).post(`${path}/comments`).send({ text: 'Hello' }).expect(404);
  const { body } = await (
    await service.as('viewer')
  )
    .post(`${path}/comments`)
    .send({ text: ' Parts of Monday were fine. ' })
    .expect(201);
  const seen = body as ProposalBody & {
    approvedVersion: number;
    versions: { version: number; by: string; note: string; proposed: { lambda: number } }[];
  };
  expect(seen).toMatchObject({ state: 'approved', version: 2, approvedVersion: 2 });
  expect(seen.events.at(-1)).toMatchObject({
    action: 'said',
    note: 'Parts of Monday were fine.',
    version: 2,
  });
  expect(seen.versions).toMatchObject([
    { version: 1, by: 'Ines Harrowgate', note: 'λ lower, α as it is', proposed: { lambda: 26 } },
    { version: 2, by: 'Ines Harrowgate', note: 'Quieter still', proposed: { lambda: 24 } },
  ]);
});

test('what is expected covers every corner of the region, and doing nothing', async () => {
  const { body } = await engineer.get(`/api/v1/proposals/${id}`).expect(200);
  const { evidence, expected } = body as {
    evidence: ProposalBody['evidence'];
    expected: Record<'worst' | 'worstBefore' | 'before' | 'after', Record<string, number>> & {
      corners: {
        gain: number;
        pole: number;
        before: Record<string, number>;
        after: Record<string, number>;
      }[];
    };
  };
  const { gain, pole } = evidence.estimate;
  expect(expected.corners.map(({ gain: k, pole: a }) => [k, a])).toEqual([
    [gain.low, pole.low],
    [gain.low, pole.high],
    [gain.high, pole.low],
    [gain.high, pole.high],
  ]);
  for (const name of [
    'peakFollowingError',
    'rmsFollowingError',
    'saturatedPct',
    'peakOutput',
    'maxSensitivity',
  ]) {
    const after = [expected.after, ...expected.corners.map((corner) => corner.after)];
    const before = [expected.before, ...expected.corners.map((corner) => corner.before)];
    expect(expected.worst[name]).toBe(Math.max(...after.map((figures) => figures[name]!)));
    expect(expected.worstBefore[name]).toBe(Math.max(...before.map((figures) => figures[name]!)));
  }
});

test.each([
  [10, 4, 5],
  [1, 6, 0.2],
  [0.037, 4, 0.01],
  [200, 4, 50],
])('an axis of %s in about %s parts has steps of %s', (span, count, step) => {
  expect(niceStep(span, count)).toBeCloseTo(step, 12);
});
