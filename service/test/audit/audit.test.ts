import { createHash } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { AuditEntry } from '../../src/audit/audit-entry.entity.js';
import { AuditService } from '../../src/audit/audit.service.js';
import { canonicalJson } from '../../src/audit/canonical-json.js';
import { Transactions } from '../../src/database/transactions.js';
import { addPerson, startPeople, type PeopleApp } from '../people/people-app.js';

let people: PeopleApp;
let audit: AuditService;
let hall: number;
let yard: number;
const record = (entry: Parameters<AuditService['record']>[1]) =>
  people.app.get(Transactions).run((manager) => audit.record(manager, entry));

beforeAll(async () => {
  people = await startPeople();
  audit = people.app.get(AuditService);
  [hall, yard] = people.siteIds;
});
afterAll(() => people.close());

describe('canonical JSON', () => {
  it('does not depend on the order in which an object was filled', () => {
    expect(canonicalJson({ b: [1, { d: null, c: 'x' }], a: new Date(0) })).toBe(
      '{"a":"1970-01-01T00:00:00.000Z","b":[1,{"c":"x","d":null}]}',
    );
    expect(canonicalJson({ a: undefined, 10: 1, 9: 2 })).toBe(canonicalJson({ 9: 2, 10: 1 }));
  });
});

describe('the record', () => {
  it('refuses to be altered or deleted, whoever asks', async () => {
    await record({ user: null, action: 'axis.changed', subject: { type: 'axis', id: 7 }, siteId: hall });
    await expect(people.dataSource.query(`UPDATE "audit_entry" SET "note" = 'x'`)).rejects.toThrow(
      /never altered/,
    );
    await expect(people.dataSource.query('DELETE FROM "audit_entry"')).rejects.toThrow(/never deleted/);
  });

  it('chains its entries, and the check finds the one that was altered behind its back', async () => {
    for (let i = 0; i < 20; i++)
      await record({
        user: null,
        action: 'axis.changed',
        subject: { type: 'axis', id: i },
        siteId: hall,
        before: { gain: 0.1 * i, at: new Date(i) },
        after: { z: 1, a: undefined, list: [undefined] },
      });
    const whole = await audit.verify();
    expect(whole).toMatchObject({ intact: true, brokenAt: null });
    expect(whole.entries).toBeGreaterThanOrEqual(21);
    // The hash of one entry, worked out from its row alone.
    const [first] = (await people.dataSource.query('SELECT * FROM "audit_entry" ORDER BY "id" LIMIT 1')) as [
      Record<string, string | number | null>,
    ];
    const content = {
      action: first.action,
      actor: first.actor,
      after: null,
      at: `${String(first.at).replace(' ', 'T')}Z`,
      before: null,
      note: null,
      siteId: first.siteId,
      subjectId: first.subjectId,
      subjectType: first.subjectType,
      userId: null,
    };
    expect(first.hash).toBe(
      createHash('sha256')
        .update('0'.repeat(64) + JSON.stringify(content))
        .digest('hex'),
    );

    const { id } = await people.dataSource
      .getRepository(AuditEntry)
      .findOneByOrFail({ subjectType: 'axis', subjectId: '11' });
    await people.dataSource.query('DROP TRIGGER "audit_entry_is_never_altered"');
    await people.dataSource.query(`UPDATE "audit_entry" SET "after" = '{"z":2}' WHERE "id" = ?`, [id]);
    expect(await audit.verify()).toMatchObject({ intact: false, brokenAt: id });
    await people.dataSource.query(
      `UPDATE "audit_entry" SET "after" = '{"z":1,"list":[null]}' WHERE "id" = ?`,
      [id],
    );
    expect(await audit.verify()).toMatchObject({ intact: true, head: whole.head });
    await people.dataSource.query('DROP TRIGGER "audit_entry_is_never_deleted"');
    const row = (await people.dataSource.query('SELECT * FROM "audit_entry" WHERE "id" = ?', [
      id,
    ])) as unknown[];
    await people.dataSource.query('DELETE FROM "audit_entry" WHERE "id" = ?', [id]);
    expect(await audit.verify()).toMatchObject({
      intact: false,
      brokenAt: id,
      reason: `Entry ${id} is missing`,
    });
    await people.dataSource.getRepository(AuditEntry).insert({
      ...(row[0] as AuditEntry),
      at: new Date(`${String((row[0] as { at: string }).at).replace(' ', 'T')}Z`),
      before: JSON.parse((row[0] as { before: string }).before),
      after: { z: 1, list: [null] },
    } as never);
    expect(await audit.verify()).toMatchObject({ intact: true });
  });

  it('keeps one end when many write at once', async () => {
    await Promise.all(
      Array.from({ length: 30 }, (_, i) =>
        record({ user: null, action: 'test.parallel', subject: { type: 'axis', id: `p${i}` }, siteId: yard }),
      ),
    );
    expect(await audit.verify()).toMatchObject({ intact: true });
  });

  it('keeps nothing of a unit of work that failed', async () => {
    const before = (await audit.verify()).entries;
    await expect(
      people.app.get(Transactions).run(async (manager) => {
        await audit.record(manager, { user: null, action: 'test.lost', subject: { type: 'axis', id: 1 } });
        throw new Error('and then it failed');
      }),
    ).rejects.toThrow('and then it failed');
    expect(await audit.verify()).toMatchObject({ entries: before, intact: true });
  });

  it('shows administrators their sites, engineers axes and proposals of theirs, and nobody else anything', async () => {
    await addPerson(people, 'halladmin', [{ siteId: hall, role: 'administrator' }]);
    await addPerson(people, 'hallengineer', [{ siteId: hall, role: 'engineer' }]);
    await record({
      user: null,
      action: 'site.registered',
      subject: { type: 'site', id: hall },
      siteId: hall,
    });
    await record({
      user: null,
      action: 'site.registered',
      subject: { type: 'site', id: yard },
      siteId: yard,
    });
    const list = async (who: string, query = '') =>
      (await (await people.as(who)).get(`/api/v1/audit?limit=200${query}`).expect(200)).body
        .items as AuditEntry[];
    const ofHall = await list('halladmin');
    expect(ofHall.length).toBeGreaterThan(20);
    expect(new Set(ofHall.map(({ siteId }) => siteId))).toEqual(new Set([hall]));
    const ofEngineer = await list('hallengineer');
    expect(new Set(ofEngineer.map(({ siteId, subjectType }) => `${siteId} ${subjectType}`))).toEqual(
      new Set([`${hall} axis`]),
    );
    expect(await list('halladmin', `&siteId=${yard}`)).toEqual([]);
    expect(await list('admin', `&siteId=${yard}&subjectType=site`)).toHaveLength(1);
    for (const who of ['viewer', 'technician']) await (await people.as(who)).get('/api/v1/audit').expect(403);
    await (await people.as('engineer')).get('/api/v1/audit/chain').expect(403);
    expect((await (await people.as('admin')).get('/api/v1/audit/chain').expect(200)).body.intact).toBe(true);
  });

  it('is read page by page, newest first, without overlap', async () => {
    const admin = await people.as('admin');
    const whole = (await admin.get('/api/v1/audit?limit=200').expect(200)).body.items as AuditEntry[];
    const read: AuditEntry[] = [];
    for (let next = ''; ;) {
      const { body } = await admin.get(`/api/v1/audit?limit=7${next}`).expect(200);
      read.push(...(body.items as AuditEntry[]));
      if (body.nextCursor === null) break;
      next = `&cursor=${body.nextCursor}`;
    }
    expect(read).toEqual(whole);
    expect(read.map(({ id }) => id)).toEqual(read.map(({ id }) => id).sort((a, b) => b - a));
    await admin.get('/api/v1/audit?limit=0').expect(400);
    await admin.get('/api/v1/audit?cursor=x').expect(400);
  });
});
