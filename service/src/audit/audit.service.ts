import { Injectable } from '@nestjs/common';
import { InjectRepository } from '@nestjs/typeorm';
import { Brackets, type EntityManager, Repository, type SelectQueryBuilder } from 'typeorm';
import type { QueryDeepPartialEntity } from 'typeorm/query-builder/QueryPartialEntity.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { UserRole } from '../people/user-role.entity.js';
import { AuditEntry } from './audit-entry.entity.js';
import { chainHash, ORIGIN, verifyChain, type ChainReport, type StoredEntry } from './chain.js';

/** Who is named when the service acted by itself. */
export const SERVICE_NAME = 'Polewright';
/** Entries that are read at once. */
const BATCH = 1_000;
/** What engineers may read the record of: the subjects of their own work. */
const ENGINEERS_SUBJECTS = ['axis', 'proposal'];
/** What belongs to the installation and to no site: for whoever administers any. */
const INSTALLATION_SUBJECTS = ['storage'];

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

/** Which part of what a person may read. */
export interface AuditScope {
  siteId?: number;
  subjectType?: string;
  subjectId?: string;
}

export interface AuditFilter extends AuditScope {
  limit: number;
  /** Only entries before this one. */
  beforeId?: number;
}

/** A value as it comes back from its JSON column. */
const asStored = (value: unknown): unknown =>
  value === undefined || value === null ? null : (JSON.parse(JSON.stringify(value)) as unknown);

@Injectable()
export class AuditService {
  constructor(
    @InjectRepository(AuditEntry) private readonly entries: Repository<AuditEntry>,
    private readonly transactions: Transactions,
  ) {}

  /**
   * Adds an entry to the record, in the transaction of what it records.
   *
   * @param manager of a unit of work of `Transactions`, which runs one at a time: the chain has one end
   */
  async record(manager: EntityManager, record: AuditRecord): Promise<void> {
    await this.recordAll(manager, [record]);
  }

  /** The same for many at once, in their order: one look for the end of the chain and few statements. */
  async recordAll(manager: EntityManager, records: readonly AuditRecord[]): Promise<void> {
    if (records.length === 0) return;
    const last = await manager.findOne(AuditEntry, {
      select: { id: true, hash: true },
      where: {},
      order: { id: 'DESC' },
    });
    let previousHash = last?.hash ?? ORIGIN;
    const entries = records.map((record) => {
      const content = {
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
      const entry = { ...content, previousHash, hash: chainHash(previousHash, content) };
      previousHash = entry.hash;
      return entry;
    });
    for (let i = 0; i < entries.length; i += BATCH)
      await manager
        .createQueryBuilder()
        .insert()
        .into(AuditEntry)
        .values(entries.slice(i, i + BATCH) as QueryDeepPartialEntity<AuditEntry>[])
        .updateEntity(false)
        .execute();
  }

  /**
   * What a person may read of the record, newest first: an administrator the sites that they administer and the people
   * of these sites, an engineer the axes and proposals of their sites.
   */
  async list(
    user: SignedInUser,
    filter: AuditFilter,
  ): Promise<{ items: AuditEntry[]; nextCursor: string | null }> {
    const query = this.readable(user, filter)
      .orderBy('entry.id', 'DESC')
      .take(filter.limit + 1);
    if (filter.beforeId) query.andWhere('entry.id < :beforeId', { beforeId: filter.beforeId });
    const found = await query.getMany();
    const items = found.slice(0, filter.limit);
    return { items, nextCursor: found.length > filter.limit ? String(items.at(-1)?.id) : null };
  }

  /** The same entries, oldest first, with their hashes, batch by batch: nothing is held that was handed on. */
  async *export(user: SignedInUser, filter: AuditScope): AsyncGenerator<AuditEntry[]> {
    for (let lastId = 0; ;) {
      const batch = await this.readable(user, filter)
        .andWhere('entry.id > :lastId', { lastId })
        .orderBy('entry.id')
        .take(BATCH)
        .getMany();
      if (batch.length > 0) yield batch;
      if (batch.length < BATCH) return;
      lastId = batch.at(-1)!.id;
    }
  }

  private readable(user: SignedInUser, filter: AuditScope): SelectQueryBuilder<AuditEntry> {
    const readable = sitesOf(user, 'audit.read');
    const administered = sitesOf(user, 'people.manage');
    const query = this.entries.createQueryBuilder('entry').where(
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
          )
          .orWhere('entry.siteId IS NULL AND entry.subjectType IN (:...shared)', {
            shared: administered.length > 0 ? INSTALLATION_SUBJECTS : [''],
          }),
      ),
    );
    if (filter.siteId !== undefined) query.andWhere('entry.siteId = :siteId', { siteId: filter.siteId });
    if (filter.subjectType) query.andWhere('entry.subjectType = :type', { type: filter.subjectType });
    if (filter.subjectId) query.andWhere('entry.subjectId = :id', { id: filter.subjectId });
    return query;
  }

  /** Walks the whole chain, as stored, and says where, if anywhere, it does not hold. */
  async verify(): Promise<ChainReport> {
    const { manager } = this.entries;
    // Asked for between two units of work: one that is under way may yet be rolled back.
    const [end] = await this.transactions.run<{ given: number; last: number }[]>((unit) =>
      unit.query(
        `SELECT COALESCE((SELECT "seq" FROM "sqlite_sequence" WHERE "name" = 'audit_entry'), 0) AS "given",
                COALESCE((SELECT MAX("id") FROM "audit_entry"), 0) AS "last"`,
      ),
    );
    const { given, last } = end!;
    async function* batches(): AsyncGenerator<StoredEntry[]> {
      for (let lastId = 0; lastId < last;) {
        const batch: StoredEntry[] = await manager.query(
          'SELECT * FROM "audit_entry" WHERE "id" > ? AND "id" <= ? ORDER BY "id" LIMIT ?',
          [lastId, last, BATCH],
        );
        if (batch.length === 0) return;
        yield batch;
        lastId = batch.at(-1)!.id;
      }
    }
    return verifyChain(batches(), given);
  }
}
