import { AxeBuilder } from '@axe-core/playwright';
import type { Page } from 'playwright-core';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { Polewright, until, type Api } from './polewright.js';

interface Interval {
  value: number;
  low: number;
  high: number;
}
interface AxisBody {
  id: number;
  tag: string;
  state: string;
  lambda: number;
  revision: number;
  baseline: { gain: number; pole: number };
  estimate: { gain: Interval; pole: Interval } | null;
  gains: Record<string, number>;
  openProposal: { id: number } | null;
}
interface ProposalBody {
  id: number;
  state: string;
  probableCause: { name: string };
  evidence: { estimate: { gain: Interval; pole: Interval } };
  current: { lambda: number; gains: Record<string, number> };
  proposed: { lambda: number; structure: string; gains: Record<string, number> };
  trial: { verdict: string } | null;
}

/** Electric axes with busy programs; the first goes to "keep", the second to "roll back". */
const KEPT = 'GA-01 traverse';
const ROLLED_BACK = 'ST-01 traverse';
const SATURATED = 'CU-03 feed';
/** The drift chart learns for eight windows; then a change of load is decided within two more. */
const LEARNING_SECONDS = 180;
const DECIDING_SECONDS = 180;

let polewright: Polewright;
let engineer: Api;
const axisOf = async (tag: string): Promise<AxisBody> =>
  (await engineer.get<{ items: AxisBody[] }>(`/axes?q=${encodeURIComponent(tag)}`)).items.find(
    (axis) => axis.tag === tag,
  )!;
const proposalOf = async (tag: string): Promise<ProposalBody> =>
  engineer.get<ProposalBody>(`/proposals/${(await axisOf(tag)).openProposal!.id}`);
/** What axe finds wrong with a page. */
const violationsOf = async (page: Page): Promise<string[]> =>
  (await new AxeBuilder({ page }).analyze()).violations.map(
    ({ id, nodes }) => `${id}: ${String(nodes[0]?.target)}`,
  );
const tile = (page: Page, tag: string) => page.locator(`article[data-tag="${tag}"]`);

beforeAll(async () => {
  polewright = await Polewright.start();
  engineer = await polewright.api('engineer');
  // The technician is told within seconds instead of a minute.
  await engineer.request('PATCH', '/alert-rules/output-saturation', { mailAfter: 3 });
  await polewright.fault(SATURATED, 'speed-up', 1);
}, 120_000);
afterAll(() => polewright?.stop());

describe('the main job, end to end', () => {
  test('(a) tiles change live', async () => {
    const page = await polewright.pageOf('viewer');
    const strip = tile(page, 'CU-04 feed').locator('svg path').nth(2);
    await tile(page, 'CU-04 feed').waitFor();
    await until('the tile has an error in millimetres', async () =>
      /\d mm/.test((await tile(page, 'CU-04 feed').textContent()) ?? ''),
    );
    const before = await tile(page, 'CU-04 feed').innerHTML();
    await until(
      'the tile has changed by itself',
      async () => (await tile(page, 'CU-04 feed').innerHTML()) !== before,
      15,
    );
    expect(await strip.count()).toBe(1);
    await page.context().close();
  });

  test('(b) a saturating axis raises an alert; from its mail the person on call acknowledges in two taps on a phone', async () => {
    const page = await polewright.pageOf('technician', 360);
    await page
      .getByRole('link', { name: /^Alerts/ })
      .last()
      .click();
    const card = page.locator('article', { hasText: `${SATURATED}: output at its limit` });
    await card.waitFor({ timeout: 120_000 });
    await until(
      'the mail is in the inbox',
      async () =>
        (await engineer.get<{ items: { subject: string }[] }>('/mail/demo-inbox')).items.some(({ subject }) =>
          subject.includes(`${SATURATED}: output at its limit`),
        ),
      60,
    );
    const button = card.getByRole('button', { name: 'Acknowledge' });
    const box = (await button.boundingBox())!;
    expect(box.height).toBeGreaterThanOrEqual(44);
    expect(await page.evaluate(() => document.documentElement.scrollWidth)).toBeLessThanOrEqual(360);
    await page.getByRole('status').filter({ hasText: 'for somebody' }).waitFor();
    expect(await violationsOf(page)).toEqual([]);
    await page.goto(`${polewright.address}/admin/mail`);
    await page
      .getByRole('button', { name: new RegExp(`${SATURATED}: output at its limit`) })
      .first()
      .click();
    const letter = page.frameLocator('iframe');
    await letter.getByRole('img', { name: new RegExp(`^${SATURATED}: gain`) }).waitFor();
    // From here on two taps.
    const opened = page.context().waitForEvent('page');
    await letter.getByRole('link', { name: 'Acknowledge …' }).click();
    const link = await opened;
    const confirm = link.getByRole('button', { name: /^Acknowledge as / });
    await confirm.waitFor();
    expect((await confirm.boundingBox())!.height).toBeGreaterThanOrEqual(44);
    expect(await violationsOf(link)).toEqual([]);
    await confirm.click();
    await link.getByText(/^Acknowledged by /).waitFor();
    await page.goto(`${polewright.address}/alerts`);
    await card.getByText(/^Acknowledged/).waitFor();
    expect(await violationsOf(page)).toEqual([]);
    await page.context().close();
  });

  test('(c) a changed load: In tune, then Out of tune, then a proposal that names it and follows the formulas', async () => {
    const page = await polewright.pageOf('engineer');
    await until(
      'both axes have learned their spread',
      async () => {
        const learned = await Promise.all(
          [KEPT, ROLLED_BACK].map(async (tag) => {
            const { id } = await axisOf(tag);
            const from = new Date(Date.now() - 600_000).toISOString();
            const { items } = await engineer.get<{ items: { chart: { pole: { state: string } } | null }[] }>(
              `/axes/${id}/estimates?from=${from}&limit=1000`,
            );
            return items.at(-1)?.chart?.pole.state === 'in-control';
          }),
        );
        return learned.every(Boolean);
      },
      LEARNING_SECONDS,
    );
    await tile(page, KEPT).getByText('In tune').waitFor();
    await polewright.fault(KEPT, 'load', 0.6);
    await polewright.fault(ROLLED_BACK, 'load', 0.6);
    await tile(page, KEPT)
      .getByText('Out of tune')
      .waitFor({ timeout: DECIDING_SECONDS * 1000 });
    await until(
      'a proposal names the load',
      async () => (await proposalOf(KEPT)).probableCause.name === 'load',
      90,
    );

    const { evidence, proposed, current } = await proposalOf(KEPT);
    const { gain, pole } = evidence.estimate;
    const lambda = current.lambda;
    const loopGain = gain.value * pole.value;
    // Closed formulas of a triple pole −λ and of full feed-forward for PI-D.
    const formula = {
      kp: (3 * lambda ** 2) / loopGain,
      ki: lambda ** 3 / loopGain,
      kd: (3 * lambda - pole.value) / loopGain,
      kv: 1 / gain.value + (3 * lambda - pole.value) / loopGain,
      ka: 1 / loopGain,
    };
    expect(proposed.lambda).toBeCloseTo(lambda, 9);
    expect(proposed.structure).toBe('PI-D');
    for (const [name, value] of Object.entries(formula))
      expect(proposed.gains[name]! / value).toBeCloseTo(1, 9);

    await tile(page, KEPT)
      .getByRole('link', { name: /^Retune/ })
      .click();
    await page.getByRole('heading', { name: 'Probably: a change of load' }).waitFor();
    await page.getByText('is kept').first().waitFor();
    expect(await violationsOf(page)).toEqual([]);
    await page.context().close();
  });

  test('(d) submitted, approved by another, scheduled, applied with read-back, back within tolerance, kept', async () => {
    await workThrough(KEPT);
    const page = await polewright.pageOf('engineer');
    await page.goto(`${polewright.address}/proposals/${(await axisOf(KEPT)).openProposal!.id}`);
    await page.getByRole('heading', { name: 'Trial: better' }).waitFor({ timeout: 120_000 });
    await until(
      'the identified loop is within tolerance again',
      async () => (await axisOf(KEPT)).state === 'in-tune',
      120,
    );
    await page.getByRole('button', { name: 'Keep the new gains' }).click();
    await page.getByRole('dialog').getByRole('button', { name: 'Keep the new gains' }).click();
    await page.getByText('kept', { exact: true }).first().waitFor();
    const axis = await axisOf(KEPT);
    expect(axis.revision).toBeGreaterThan(1);
    expect(axis.openProposal).toBeNull();
    expect(axis.estimate!.pole.value / axis.baseline.pole).toBeCloseTo(1, 1);
    await page.context().close();
  });

  test('(e) the same with roll back', async () => {
    const former = (await axisOf(ROLLED_BACK)).gains;
    await workThrough(ROLLED_BACK);
    const { id } = (await axisOf(ROLLED_BACK)).openProposal!;
    const technician = await polewright.pageOf('technician');
    await putIn(technician, ROLLED_BACK, 'maintenance');
    await technician.goto(`${polewright.address}/proposals/${id}`);
    await until('the axis rests and the roll-back is taken', async () => {
      await technician.getByRole('button', { name: 'Roll back' }).first().click();
      const dialog = technician.getByRole('dialog');
      await dialog.getByLabel('Reason').fill('Louder than before');
      await dialog.getByRole('button', { name: 'Roll back' }).click();
      return taken(technician);
    });
    await until('the machine runs with the former gains', async () => {
      const { state } = await engineer.get<ProposalBody>(`/proposals/${id}`);
      return state === 'rolled back';
    });
    const axis = await axisOf(ROLLED_BACK);
    expect(axis.revision).toBe(3);
    expect(axis.gains).toEqual(former);
    await putIn(technician, ROLLED_BACK, 'production');
    await technician.context().close();
  });

  test('(f) a viewer can do none of it, by page or by API', async () => {
    const viewer = await polewright.api('viewer');
    const axis = await axisOf(SATURATED);
    const draft = await engineer.request<{ id: number }>('POST', '/proposals', { axisId: axis.id });
    expect(draft.status).toBe(201);
    const id = draft.body.id;
    const alerts = await engineer.get<{ items: { id: number }[] }>('/alerts');
    const refused: [string, string, unknown?][] = [
      ['POST', `/alerts/${alerts.items[0]!.id}/acknowledge`, {}],
      ['POST', `/axes/${axis.id}/maintenance`, { on: true, reason: 'no' }],
      ['PATCH', `/axes/${axis.id}`, { name: 'no' }],
      ['POST', '/proposals', { axisId: axis.id }],
      ['POST', `/proposals/${id}/submit`],
      ['POST', `/proposals/${id}/withdraw`],
      ['PATCH', '/alert-rules/no-signal', { threshold: 1 }],
      ['POST', '/machines', { siteId: 1, name: 'no' }],
      ['POST', '/sites', { name: 'no', timeZone: 'Europe/London' }],
      ['POST', '/gateways', { siteId: 1, name: 'no' }],
    ];
    for (const [method, path, body] of refused)
      expect({ path, status: (await viewer.request(method, path, body)).status }).toEqual({
        path,
        status: 403,
      });
    const page = await polewright.pageOf('viewer');
    await page.goto(`${polewright.address}/alerts`);
    await page.locator('article').first().waitFor();
    expect(await page.getByRole('button', { name: /Acknowledge|Shelve/ }).count()).toBe(0);
    await page.goto(`${polewright.address}/proposals/${id}`);
    await page.getByRole('heading', { name: /^Retune/ }).waitFor();
    expect(
      await page.getByRole('button', { name: /review|Approve|Withdraw|Schedule|Apply|Make version/ }).count(),
    ).toBe(0);
    await page.goto(`${polewright.address}/axes/${axis.id}`);
    await page.getByRole('heading', { name: SATURATED }).waitFor();
    expect(await page.getByRole('button', { name: /Maintenance|baseline|proposal/ }).count()).toBe(0);
    await page.context().close();
  });
});

/** By the pages, each person their own step: engineer, approver, engineer, technician; ends back in production on trial. */
async function workThrough(tag: string): Promise<void> {
  const { id } = (await axisOf(tag)).openProposal!;
  const url = `${polewright.address}/proposals/${id}`;
  const take = async (page: Page, button: RegExp): Promise<void> => {
    await page.goto(url);
    await page.getByRole('button', { name: button }).click();
    await page.getByRole('dialog').getByRole('button', { name: button }).click();
    await page.getByRole('dialog').waitFor({ state: 'hidden' });
  };
  const engineerPage = await polewright.pageOf('engineer');
  await take(engineerPage, /^Send for review/);
  const approver = await polewright.pageOf('approver');
  await approver.goto(url);
  await approver.getByRole('button', { name: /^Approve version/ }).click();
  await approver.getByRole('dialog').getByRole('button', { name: 'Approve' }).click();
  await approver.getByRole('dialog').waitFor({ state: 'hidden' });
  await take(engineerPage, /^Schedule/);
  const technician = await polewright.pageOf('technician');
  await putIn(technician, tag, 'maintenance');
  await technician.goto(url);
  await until(`${tag} rests and takes the gains`, async () => {
    await technician.getByRole('button', { name: 'Apply at the machine' }).click();
    const dialog = technician.getByRole('dialog');
    for (const box of await dialog.getByRole('checkbox').all()) await box.check();
    await dialog.getByLabel('Your password, once more').fill('polewright-demo');
    await dialog.getByRole('button', { name: 'Go on' }).click();
    await dialog.getByRole('button', { name: /^Send the gains/ }).click();
    return taken(technician);
  });
  await until(
    'the machine has read the gains back',
    async () => (await proposalOf(tag)).state === 'on trial',
    30,
  );
  await putIn(technician, tag, 'production');
  for (const page of [engineerPage, approver, technician]) await page.context().close();
}

/** Whether the open dialog's step was taken; when it was refused, the dialog says why and is closed. */
async function taken(page: Page): Promise<boolean> {
  const dialog = page.getByRole('dialog');
  await Promise.race([dialog.waitFor({ state: 'hidden' }), dialog.getByRole('alert').waitFor()]);
  if (!(await dialog.isVisible())) return true;
  await dialog.getByRole('button', { name: 'Cancel' }).click();
  await dialog.waitFor({ state: 'hidden' });
  return false;
}

async function putIn(page: Page, tag: string, where: 'maintenance' | 'production'): Promise<void> {
  await page.goto(`${polewright.address}/axes/${(await axisOf(tag)).id}`);
  await page
    .getByRole('button', { name: where === 'maintenance' ? 'Maintenance …' : 'Back into production …' })
    .click();
  const dialog = page.getByRole('dialog');
  await dialog.getByLabel('Reason').fill('Retune');
  await dialog
    .getByRole('button', { name: where === 'maintenance' ? 'Put it in maintenance' : 'Back into production' })
    .click();
  await dialog.waitFor({ state: 'hidden' });
}
