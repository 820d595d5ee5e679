import { afterEach, describe, expect, test } from 'vitest';
import { AuditEntry } from '../../src/audit/audit-entry.entity.js';
import { AlertEvent } from '../../src/alerts/alert.entity.js';
import { quietUntil } from '../../src/alerts/escalation-steps.js';
import { AlertHouse } from './alert-house.js';

let house: AlertHouse;
let opened: AlertHouse[] = [];
afterEach(async () => {
  for (const one of opened) await one.close();
  opened = [];
});
const open = async (what: Parameters<typeof AlertHouse.open>[0] = {}): Promise<AlertHouse> => {
  const one = await AlertHouse.open(what);
  opened.push(one);
  return one;
};

const states = async (): Promise<string[]> => (await house.all()).map(({ state }) => state);
const set = (index: number, levels: Parameters<AlertHouse['levels']['set']>[1]): void =>
  void house.levels.set(house.axes[index]!.id, levels);

describe('escalation', () => {
  test('in a gap of the rota the fallback is told; who comes on call then gets the step that was kept', async () => {
    house = await open();
    set(0, { peakFollowingError: 2 });
    await house.pass(20 + 60 + 5);
    const [alert] = await house.all();
    expect(await house.actions(alert!.id)).toEqual(['raised', 'nobody on call', 'told Cass Vane by mail']);
    expect(alert).toMatchObject({ state: 'unacknowledged', stepsTaken: 0 });
    // The gap goes on: told again as a later step would be, not every half minute.
    await house.pass(130);
    expect(house.told.map(({ name }) => name)).toEqual(['Cass Vane', 'Cass Vane']);
    house.onCall = house.person('Bea Lorne');
    await house.pass(31);
    expect(house.told.map(({ name }) => name)).toEqual(['Cass Vane', 'Cass Vane', 'Bea Lorne']);
    expect((await house.all())[0]).toMatchObject({ stepsTaken: 1 });
  });

  test('goes on by priority until somebody acknowledges, to the fallback as well from the third step', async () => {
    house = await open();
    house.onCall = house.person('Bea Lorne');
    set(0, { peakFollowingError: 2 });
    await house.pass(20 + 60 + 120 + 240 + 2);
    expect(house.told.map(({ name }) => name)).toEqual(['Bea Lorne', 'Bea Lorne', 'Bea Lorne', 'Cass Vane']);
    const [alert] = await house.all();
    await house.alerts.acknowledge(alert!.id, house.user, null);
    await house.pass(3_600, 10);
    expect(house.told).toHaveLength(4);
    expect(new Set(house.told.map(({ key }) => key)).size).toBe(4);
  });

  test('starts anew after a shelf, with mails of its own', async () => {
    house = await open();
    house.onCall = house.person('Bea Lorne');
    set(0, { peakFollowingError: 2 });
    await house.pass(90);
    const [alert] = await house.all();
    await house.alerts.shelve(alert!.id, house.user, new Date(house.now + 100_000), 'Known');
    await house.pass(90);
    expect(house.told).toHaveLength(1);
    await house.pass(12 + 60);
    expect(await states()).toEqual(['unacknowledged']);
    expect(house.told).toHaveLength(2);
    expect(house.told[0]!.key).not.toBe(house.told[1]!.key);
  });

  test('low priority waits for the end of the quiet hours on the site’s clock, over a clock change too', () => {
    const until = (at: string, zone: string): string | undefined =>
      quietUntil(new Date(at), zone)?.toISOString();
    expect(until('2026-07-01T20:59:00Z', 'Europe/London')).toBeUndefined(); // 21:59
    expect(until('2026-07-01T21:00:00Z', 'Europe/London')).toBe('2026-07-02T05:00:00.000Z');
    expect(until('2026-07-02T04:59:00Z', 'Europe/London')).toBe('2026-07-02T05:00:00.000Z');
    expect(until('2026-07-02T05:00:00Z', 'Europe/London')).toBeUndefined();
    // The clocks go back in the night to 25 October 2026: 06:00 is 06:00 UTC.
    expect(until('2026-10-24T22:00:00Z', 'Europe/London')).toBe('2026-10-25T06:00:00.000Z');
    expect(until('2026-03-08T04:00:00Z', 'America/New_York')).toBe('2026-03-08T10:00:00.000Z');
  });
});

describe('a look', () => {
  test('stores a clear during a shelf, so that its end is over whatever the level is then', async () => {
    house = await open();
    set(0, { peakFollowingError: 2 });
    await house.pass(21);
    const [alert] = await house.all();
    await house.alerts.shelve(alert!.id, house.user, new Date(house.now + 120_000), 'Known');
    set(0, { peakFollowingError: 0 });
    await house.pass(61);
    expect((await house.all())[0]).toMatchObject({ state: 'shelved', returnedAt: expect.any(Date) });
    set(0, { peakFollowingError: null });
    await house.start();
    await house.pass(60);
    expect(await states()).toEqual(['normal']);
    expect(await house.actions(alert!.id)).toEqual([
      'raised',
      'shelved',
      'returned to normal',
      'taken off the shelf',
    ]);
  });

  test('goes on after a restart where the delay had got to', async () => {
    house = await open();
    set(0, { peakFollowingError: 2 });
    await house.pass(15);
    await house.start();
    await house.pass(5);
    expect(await states()).toEqual([]);
    await house.pass(1);
    expect(await states()).toEqual(['unacknowledged']);
  });

  test('ends what cannot be measured any more after a day; a person still acknowledges it', async () => {
    house = await open();
    set(0, { peakFollowingError: 2 });
    await house.pass(21);
    set(0, { peakFollowingError: null });
    await house.pass(23 * 3_600, 600);
    expect(await states()).toEqual(['unacknowledged']);
    await house.pass(2 * 3_600, 600);
    expect(await states()).toEqual(['returned-unacknowledged']);
    const [alert] = await house.all();
    await house.alerts.acknowledge(alert!.id, house.user, null);
    expect(await states()).toEqual(['normal']);
  });

  test('a dead gateway raises one alert, not thirty; when it is back the silent ones speak for themselves', async () => {
    house = await open({ axes: 31, gateways: 2 });
    house.onCall = house.person('Bea Lorne');
    const [dead, alive] = house.gatewayIds as [number, number];
    const ids = house.axes.map(({ id }) => id);
    await house.gateways.greeted({ gatewayId: dead, axisIds: ids.slice(0, 30) });
    await house.gateways.greeted({ gatewayId: alive, axisIds: ids.slice(30) });
    await house.start();
    // Its first axis is in maintenance, and its second was silent before and shelved by a person.
    house.axes[0]!.inMaintenance = true;
    house.heard.set(alive, house.now + 1e6).set(dead, house.now + 20_000);
    set(1, { silence: 60 });
    await house.pass(1);
    const [own] = await house.all();
    await house.alerts.shelve(own!.id, house.user, new Date(house.now + 86_400_000), 'Switched off');
    for (let t = 0; t < 60; t++) {
      for (const [i] of house.axes.entries()) if (i < 30 && i !== 1) set(i, { silence: Math.max(0, t - 19) });
      await house.pass(1);
    }
    const standing = await house.all();
    expect(standing.map(({ state }) => state)).toEqual(['shelved', 'unacknowledged']);
    expect(standing[1]).toMatchObject({ axisId: ids[2], gatewayId: dead });
    expect(standing[1]!.message).toMatch(
      /^Gateway gateway 1 has sent nothing for \d+ s: none of its 30 axes/,
    );
    // Known after a restart as well.
    await house.start();
    await house.pass(2);
    expect(await house.all()).toHaveLength(2);
    // It is back; one of its axes is not.
    for (const [i] of house.axes.entries()) if (i < 30 && i !== 1 && i !== 9) set(i, {});
    set(9, { silence: 100 });
    house.heard.set(dead, house.now + 1e6);
    await house.pass(10);
    const after = await house.all();
    expect(after.map(({ axisId, state }) => [axisId, state])).toEqual([
      [ids[1], 'shelved'],
      [ids[2], 'returned-unacknowledged'],
      [ids[9], 'unacknowledged'],
    ]);
    expect(after[2]!.message).toBe('No samples for 100 s.');
  });
});

/** STORM=10000 makes it a storm of that many; by default it is small enough for every day. */
const STORM = Number(process.env.STORM ?? 1_400);

test('a storm of alerts in a minute passes: each raised and told of once, the record whole', async () => {
  const count = 7 * Math.ceil(STORM / 7);
  house = await open({ axes: count / 7 });
  house.onCall = house.person('Bea Lorne');
  const all = {
    saturatedPct: 50,
    peakFollowingError: 3,
    gainDriftPct: 30,
    poleDriftPct: 30,
    frictionRise: 3,
    outputActivity: 6,
    silence: 20,
  };
  for (let part = 0; part < 6; part++) {
    const share = Math.ceil(house.axes.length / 6);
    for (let i = part * share; i < Math.min(house.axes.length, (part + 1) * share); i++) set(i, all);
    await house.pass(10, 10);
  }
  await house.pass(360, 60);
  const alerts = await house.all();
  expect(alerts).toHaveLength(count);
  expect(new Set(alerts.map(({ axisId, rule }) => `${axisId} ${rule}`)).size).toBe(count);
  const events = house.dataSource.getRepository(AlertEvent);
  expect(await events.countBy({ action: 'raised' })).toBe(count);
  expect(await house.dataSource.getRepository(AuditEntry).countBy({ action: 'alert.raised' })).toBe(count);
  expect(await house.audit.verify()).toMatchObject({ intact: true, entries: count });
  // Everybody due was told, and nobody twice of the same step.
  expect(alerts.every(({ stepsTaken }) => stepsTaken > 0)).toBe(true);
  expect(new Set(house.told.map(({ alertId, key }) => `${alertId} ${key}`)).size).toBe(house.told.length);
  expect(await events.countBy({ action: 'told' })).toBe(house.told.length);
  // The page reads a hundred at once, by urgency, each once.
  const seen: number[] = [];
  for (let from = 0; from < 300; from += 100) {
    const page = await house.alerts.list({ siteIds: [house.siteId], state: 'open', limit: 100, from });
    expect(page).toHaveLength(101);
    expect(page.every(({ priority }) => priority === 'high')).toBe(true);
    seen.push(...page.slice(0, 100).map(({ id }) => id));
  }
  expect(new Set(seen).size).toBe(300);
});
