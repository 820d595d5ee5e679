import { Injectable } from '@nestjs/common';
import { InjectRepository } from '@nestjs/typeorm';
import { createHash } from 'node:crypto';
import { Brackets, type EntityManager, Repository } from 'typeorm';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { UserRole } from '../people/user-role.entity.js';
import { AuditEntry } from './audit-entry.entity.js';
import { canonicalJson } from './canonical-json.js';

/** What stands before the first entry. */
const ORIGIN = '0'.repeat(64);
/** Who is named when the service acted by itself. */
export const SERVICE_NAME = 'Polewright';
/** Entries that are read at once while the chain is checked. */
const VERIFY_BATCH = 1_000;
/** What engineers may read the record of: the subjects of their own work. */
const ENGINEERS_SUBJECTS = ['axis', 'proposal'];

export interface AuditRecord {
  /** null when the service itself acts */
  user: SignedInUser | null;
  /** Such as "proposal.approve". */
  action: string;
  subject: { type: string; id: number | string };
  siteId?: number | null;
  note?: string | null;
  before?: unknown;
  after?: unknown;
}

export interface AuditFilter {
  siteId?: number;
  subjectType?: string;
  subjectId?: string;
  limit: number;
  /** Only entries before this one. */
  beforeId?: number;
}

export interface ChainReport {
  entries: number;
  intact: boolean;
  /** The first entry that does not follow from the one before it, or was altered. */
  brokenAt: number | null;
  /** The hash of the last good entry: kept elsewhere, it also shows a cut-off end. */
  head: string;
}

/** SHA-256 over the hash of the entry before and the canonical JSON of this entry's content, in hexadecimal. */
function chainHash(previousHash: string, entry: Omit<AuditEntry, 'id' | 'hash' | 'previousHash'>): string {
  const { at, userId, actor, action, subjectType, subjectId, siteId, note, before, after } = entry;
  const content = { at, userId, actor, action, subjectType, subjectId, siteId, note, before, after };
  return createHash('sha256').update(previousHash).update(canonicalJson(content)).digest('hex');
}

/** A value as it comes back from its JSON column. */
const asStored = (value: unknown): unknown =>
  value === undefined || value === null ? null : (JSON.parse(JSON.stringify(value)) as unknown);

@Injectable()
export class AuditService {
  constructor(@InjectRepository(AuditEntry) private readonly entries: Repository<AuditEntry>) {}

  /**
   * Adds an entry to the record, in the transaction of what it records.
   *
   * @param manager of a unit of work of `Transactions`, which runs one at a time: the chain has one end
   */
  async record(manager: EntityManager, record: AuditRecord): Promise<void> {
    const last = await manager.findOne(AuditEntry, {
      select: { id: true, hash: true },
      where: {},
      order: { id: 'DESC' },
    });
    const previousHash = last?.hash ?? ORIGIN;
    const entry = {
      at: new Date(),
      userId: record.user?.id ?? null,
      actor: record.user?.name ?? SERVICE_NAME,
      action: record.action,
      subjectType: record.subject.type,
      subjectId: String(record.subject.id),
      siteId: record.siteId ?? null,
      note: record.note ?? null,
      before: asStored(record.before),
      after: asStored(record.after),
    };
    await manager.save(
      Object.assign(new AuditEntry(), entry, { previousHash, hash: chainHash(previousHash, entry) }),
    );
  }

  /**
   * What a person may read of the record, newest first: an administrator the sites that they administer and the people
   * of these sites, an engineer the axes and proposals of their sites.
   */
  async list(
    user: SignedInUser,
    filter: AuditFilter,
  ): Promise<{ items: AuditEntry[]; nextCursor: string | null }> {
    const readable = sitesOf(user, 'audit.read');
    const administered = sitesOf(user, 'people.manage');
    const query = this.entries
      .createQueryBuilder('entry')
      .where(
        new Brackets((scope) =>
          scope
            .where('entry.siteId IN (:...administered)', { administered: [-1, ...administered] })
            .orWhere('entry.siteId IN (:...readable) AND entry.subjectType IN (:...subjects)', {
              readable: [-1, ...readable],
              subjects: ENGINEERS_SUBJECTS,
            })
            .orWhere(
              `entry.siteId IS NULL AND entry.subjectType = 'person' AND EXISTS (${this.entries.manager
                .createQueryBuilder(UserRole, 'role')
                .select('1')
                .where('CAST(role.userId AS TEXT) = entry.subjectId AND role.siteId IN (:...administered)')
                .getQuery()})`,
            ),
        ),
      )
      .orderBy('entry.id', 'DESC')
      .take(filter.limit + 1);
    if (filter.siteId !== undefined) query.andWhere('entry.siteId = :siteId', { siteId: filter.siteId });
    if (filter.subjectType) query.andWhere('entry.subjectType = :type', { type: filter.subjectType });
    if (filter.subjectId) query.andWhere('entry.subjectId = :id', { id: filter.subjectId });
    if (filter.beforeId) query.andWhere('entry.id < :beforeId', { beforeId: filter.beforeId });
    const found = await query.getMany();
    const items = found.slice(0, filter.limit);
    return { items, nextCursor: found.length > filter.limit ? String(items.at(-1)?.id) : null };
  }

  /** Walks the whole chain and says where, if anywhere, it does not hold. */
  async verify(): Promise<ChainReport> {
    const report: ChainReport = { entries: 0, intact: true, brokenAt: null, head: ORIGIN };
    for (let lastId = 0; ;) {
      const batch = await this.entries
        .createQueryBuilder('entry')
        .where('entry.id > :lastId', { lastId })
        .orderBy('entry.id')
        .take(VERIFY_BATCH)
        .getMany();
      for (const entry of batch) {
        if (entry.previousHash !== report.head || chainHash(entry.previousHash, entry) !== entry.hash)
          return { ...report, intact: false, brokenAt: entry.id };
        report.entries += 1;
        report.head = entry.hash;
        lastId = entry.id;
      }
      if (batch.length < VERIFY_BATCH) return report;
    }
  }
}
