import Database from 'better-sqlite3';
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { AuditService } from '../../src/audit/audit.service.js';
import { ORIGIN, type StoredEntry } from '../../src/audit/chain.js';
import { verifyRecord } from '../../src/audit/verify-record.js';
import { Transactions } from '../../src/database/transactions.js';
import { startPeople, type PeopleApp } from '../people/people-app.js';

const FOLDER = mkdtempSync(join(tmpdir(), 'polewright-record-'));
let people: PeopleApp;
let hall: number;
let copies = 0;
/** The entry that is worked on: every column of it holds something. */
let victim: number;

beforeAll(async () => {
  people = await startPeople();
  [hall] = people.siteIds;
  const admin = await people.as('admin');
  const { id } = (await admin.get('/api/v1/auth/me').expect(200)).body as { id: number };
  const user = { id, name: 'Edda Roe', email: 'x@tarnwick.example', owner: false, roles: [] };
  for (let i = 0; i < 12; i++)
    await people.app.get(Transactions).run((manager) =>
      people.app.get(AuditService).record(manager, {
        user,
        action: 'axis.changed',
        subject: { type: 'axis', id: 40 + i },
        siteId: hall,
        note: 'Pallets are heavier – since Monday',
        before: { gain: 0.1 + 0.2, list: [1, null, 'x'] },
        after: { gain: 12.5, on: true },
      }),
    );
  const rows = (await people.dataSource.query(`SELECT "id" FROM "audit_entry" WHERE "subjectId" = '45'`)) as {
    id: number;
  }[];
  victim = rows[0]!.id;
});
afterAll(async () => {
  await people.close();
  rmSync(FOLDER, { recursive: true });
});

/** A copy of the database file, worked on as a database tool would: triggers dropped, rows altered. */
async function tampered(
  work: (database: Database.Database) => void,
): Promise<{ code: number; said: string }> {
  const path = join(FOLDER, `${++copies}.sqlite`);
  await people.dataSource.query('VACUUM INTO ?', [path]);
  const database = new Database(path);
  database.exec('DROP TRIGGER "audit_entry_is_never_altered"; DROP TRIGGER "audit_entry_is_never_deleted"');
  work(database);
  database.close();
  const said: string[] = [];
  const code = await verifyRecord(path, (line) => said.push(line));
  return { code, said: said.join('\n') };
}

const rowOf = (database: Database.Database, id: number): StoredEntry =>
  database.prepare('SELECT * FROM "audit_entry" WHERE "id" = ?').get(id) as StoredEntry;

describe('a record that somebody was at with a database tool', () => {
  it('is intact as it was written', async () => {
    const { code, said } = await tampered(() => undefined);
    expect(said).toMatch(/^The record is intact: \d+ entries\. Head [0-9a-f]{64}$/);
    expect(code).toBe(0);
  });

  const TEXTS = ['at', 'actor', 'action', 'subjectType', 'subjectId', 'note', 'before', 'after'] as const;
  it.each([...TEXTS, 'previousHash', 'hash'] as const)(
    'names the entry in which one byte of "%s" was changed',
    async (column) => {
      const { code, said } = await tampered((database) => {
        const text = rowOf(database, victim)[column]!;
        // The last digit or letter: in "before" the one that changes no number as it is read.
        const bytes = Buffer.from(text);
        const at =
          column === 'before'
            ? bytes.indexOf('4,')
            : bytes.findLastIndex((byte) => /[0-9a-z]/.test(String.fromCharCode(byte)));
        const byte = bytes[at]!;
        bytes[at] = byte === 0x39 || byte === 0x7a ? byte - 1 : byte + 1;
        database
          .prepare(`UPDATE "audit_entry" SET "${column}" = ? WHERE "id" = ?`)
          .run(bytes.toString(), victim);
        const now = rowOf(database, victim)[column]!;
        expect(now).not.toBe(text);
        if (column === 'before') expect(JSON.parse(now)).toEqual(JSON.parse(text));
      });
      expect(code).toBe(1);
      expect(said).toContain(`broken at entry ${victim}:`);
      expect(said).toContain('"subjectType":');
    },
  );

  it.each(['userId', 'siteId'])('names the entry in which "%s" was changed', async (column) => {
    const { said } = await tampered((database) =>
      database.prepare(`UPDATE "audit_entry" SET "${column}" = "${column}" + 1 WHERE "id" = ?`).run(victim),
    );
    expect(said).toContain(`broken at entry ${victim}:`);
  });

  it('sees a hash that was made anew for altered content, at the next entry', async () => {
    const { said } = await tampered((database) =>
      database.prepare(`UPDATE "audit_entry" SET "hash" = ? WHERE "id" = ?`).run('f'.repeat(64), victim),
    );
    expect(said).toContain(`broken at entry ${victim}:`);
  });

  it('sees an entry that was taken out, and a chain that was closed over the gap', async () => {
    const { said } = await tampered((database) => {
      const { previousHash } = rowOf(database, victim);
      database.prepare('DELETE FROM "audit_entry" WHERE "id" = ?').run(victim);
      database
        .prepare('UPDATE "audit_entry" SET "previousHash" = ? WHERE "id" = ?')
        .run(previousHash, victim + 1);
    });
    expect(said).toContain(`broken at entry ${victim}: Entry ${victim} is missing`);
  });

  it('sees two entries that changed places', async () => {
    const { said } = await tampered((database) => {
      const move = database.prepare('UPDATE "audit_entry" SET "id" = ? WHERE "id" = ?');
      move.run(-1, victim);
      move.run(victim, victim + 1);
      move.run(victim + 1, -1);
    });
    expect(said).toContain(`broken at entry ${victim}: It does not follow`);
  });

  it('sees an end that was cut off, and a beginning', async () => {
    const end = await tampered((database) => {
      database.exec('DELETE FROM "audit_entry" WHERE "id" > (SELECT MAX("id") - 2 FROM "audit_entry")');
    });
    expect(end.said).toMatch(/The end is cut off: entries up to \d+ were written/);
    const beginning = await tampered((database) => {
      database.exec('DELETE FROM "audit_entry" WHERE "id" < 3');
    });
    expect(beginning.said).toContain('broken at entry 1: Entries 1 to 2 are missing');
    expect(beginning.said).toContain(ORIGIN);
  });

  it('says so where there is no record', async () => {
    const said: string[] = [];
    expect(await verifyRecord(join(FOLDER, 'none.sqlite'), (line) => said.push(line))).toBe(2);
    expect(said[0]).toContain('There is no database at');
    const empty = join(FOLDER, 'empty.sqlite');
    new Database(empty).exec('CREATE TABLE "x" ("y")');
    expect(await verifyRecord(empty, (line) => said.push(line))).toBe(2);
    expect(said[1]).toContain('cannot be read');
  });
});

describe('the export', () => {
  it('hands the record out as JSON lines, oldest first, with its hashes; and that it did is in the record', async () => {
    const admin = await people.as('admin');
    const answer = await admin.get('/api/v1/audit/export').responseType('blob');
    expect(answer.status).toBe(200);
    expect(answer.headers['content-type']).toMatch(/^application\/jsonl/);
    expect(answer.headers['content-disposition']).toContain('polewright-record.jsonl');
    const lines = (answer.body as Buffer)
      .toString()
      .trimEnd()
      .split('\n')
      .map((line) => JSON.parse(line) as Record<string, unknown>);
    const whole = (await admin.get('/api/v1/audit?limit=200').expect(200)).body.items as { id: number }[];
    expect(lines.map(({ id }) => id)).toEqual(whole.map(({ id }) => id).sort((a, b) => a - b));
    expect(lines.at(-1)).toMatchObject({ action: 'record.exported' });
    const entry = lines.find(({ id }) => id === victim)!;
    expect(entry).toMatchObject({
      note: 'Pallets are heavier – since Monday',
      after: { gain: 12.5, on: true },
    });
    expect(entry.hash).toMatch(/^[0-9a-f]{64}$/);
    expect(lines.find(({ id }) => id === victim + 1)!.previousHash).toBe(entry.hash);

    const one = await admin
      .get('/api/v1/audit/export?subjectType=axis&subjectId=45')

      .responseType('blob');
    expect((one.body as Buffer).toString().trimEnd().split('\n')).toHaveLength(1);
    for (const who of ['viewer', 'technician', 'engineer', 'approver'])
      await (await people.as(who)).get('/api/v1/audit/export').expect(403);
  });
});
