import { createHash } from 'node:crypto';
import { canonicalJson } from './canonical-json.js';

/** What stands before the first entry. */
export const ORIGIN = '0'.repeat(64);

/** What an entry says; the hash covers all of it. */
export interface AuditContent {
  at: Date;
  userId: number | null;
  actor: string;
  action: string;
  subjectType: string;
  subjectId: string;
  siteId: number | null;
  note: string | null;
  before: unknown;
  after: unknown;
}

/** A row of "audit_entry" as SQLite holds it, before any of it is read as a time or as JSON. */
export interface StoredEntry {
  id: number;
  at: string;
  userId: number | null;
  actor: string;
  action: string;
  subjectType: string;
  subjectId: string;
  siteId: number | null;
  note: string | null;
  before: string | null;
  after: string | null;
  previousHash: string;
  hash: string;
}

export interface ChainReport {
  /** Good entries from the first one on. */
  entries: number;
  intact: boolean;
  /** The first entry that does not follow from the one before it, or was altered. */
  brokenAt: number | null;
  /** What is wrong there, in words. */
  reason: string | null;
  /** The first bad entry as it reads now; null when it is gone. */
  broken: StoredEntry | null;
  /** The hash of the last good entry: kept elsewhere, it also shows a record that was made anew as a whole. */
  head: string;
}

/** SHA-256 over the hash of the entry before and the canonical JSON of this entry's content, in hexadecimal. */
export function chainHash(previousHash: string, content: AuditContent): string {
  const { at, userId, actor, action, subjectType, subjectId, siteId, note, before, after } = content;
  return createHash('sha256')
    .update(previousHash)
    .update(canonicalJson({ at, userId, actor, action, subjectType, subjectId, siteId, note, before, after }))
    .digest('hex');
}

/** "2026-03-01 08:15:00.000", the one way in which a time is stored. */
const timeAsStored = (at: Date): string => at.toISOString().replace('T', ' ').replace('Z', '');
const isText = (value: unknown): boolean => typeof value === 'string';
const isNumberOrNull = (value: unknown): boolean => value === null || Number.isInteger(value);

/**
 * Why an entry does not stand in the chain, or null when it does.
 *
 * Values are compared as they are stored, not as they are read: 0.30000000000000004 and 0.30000000000000005 are the
 * same number, and still somebody was at the row.
 */
export function faultOf(entry: StoredEntry, previousId: number, previousHash: string): string | null {
  const { id, at, userId, siteId, before, after } = entry;
  if (id !== previousId + 1)
    return id === previousId + 2
      ? `Entry ${previousId + 1} is missing`
      : `Entries ${previousId + 1} to ${id - 1} are missing`;
  const time = new Date(`${at.replace(' ', 'T')}Z`);
  if (Number.isNaN(time.getTime()) || timeAsStored(time) !== at) return 'Its time was altered';
  if (
    !isNumberOrNull(userId) ||
    !isNumberOrNull(siteId) ||
    ![entry.actor, entry.action, entry.subjectType, entry.subjectId].every(isText)
  )
    return 'A value was altered to one of another kind';
  const values: unknown[] = [];
  for (const [name, text] of [
    ['before', before],
    ['after', after],
  ] as const) {
    try {
      const value = text === null ? null : (JSON.parse(text) as unknown);
      if (text !== null && (value === null || JSON.stringify(value) !== text))
        return `What stood ${name} was altered`;
      values.push(value);
    } catch {
      return `What stood ${name} was altered: it is no JSON any more`;
    }
  }
  if (entry.previousHash !== previousHash) return 'It does not follow from the entry before it';
  if (chainHash(previousHash, { ...entry, at: time, before: values[0], after: values[1] }) !== entry.hash)
    return 'Its content or its hash was altered';
  return null;
}

/**
 * Walks the chain and says where, if anywhere, it does not hold.
 *
 * @param batches the rows of "audit_entry" by ascending id
 * @param lastGiven the highest id that SQLite has ever given in this table ("sqlite_sequence"): shows a cut-off end
 */
export async function verifyChain(
  batches: AsyncIterable<StoredEntry[]> | Iterable<StoredEntry[]>,
  lastGiven: number,
): Promise<ChainReport> {
  const report: ChainReport = {
    entries: 0,
    intact: true,
    brokenAt: null,
    reason: null,
    broken: null,
    head: ORIGIN,
  };
  let lastId = 0;
  for await (const batch of batches)
    for (const entry of batch) {
      const reason = faultOf(entry, lastId, report.head);
      if (reason) {
        const missing = entry.id !== lastId + 1;
        return {
          ...report,
          intact: false,
          brokenAt: missing ? lastId + 1 : entry.id,
          reason,
          broken: missing ? null : entry,
        };
      }
      report.entries += 1;
      report.head = entry.hash;
      lastId = entry.id;
    }
  if (lastGiven > lastId)
    return {
      ...report,
      intact: false,
      brokenAt: lastId + 1,
      reason: `The end is cut off: entries up to ${lastGiven} were written`,
    };
  return report;
}
