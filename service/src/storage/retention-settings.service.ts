import { BadRequestException, Injectable, type OnModuleInit } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { RETENTION, RETENTION_KINDS, retentionProblems, type Retention } from './retention.js';
import { RetentionSetting } from './retention-setting.entity.js';

/** How long everything is kept: rows of a table, at hand in memory. */
@Injectable()
export class RetentionSettings implements OnModuleInit {
  private kept: Retention = Object.fromEntries(
    RETENTION_KINDS.map((kind) => [kind, RETENTION[kind].default]),
  ) as Retention;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
  ) {}

  /** Reads the settings; those that the table does not have yet are put there. */
  async onModuleInit(): Promise<void> {
    const repository = this.dataSource.getRepository(RetentionSetting);
    const stored = await repository.find();
    const missing = RETENTION_KINDS.filter((kind) => !stored.some((row) => row.kind === kind)).map(
      (kind) => ({ kind, keptSeconds: RETENTION[kind].default }),
    );
    if (missing.length > 0) await repository.insert(missing);
    this.kept = this.with(stored);
  }

  get(): Readonly<Retention> {
    return this.kept;
  }

  /**
   * Changes how long is kept, from now on.
   *
   * @param change s, by kind
   * @throws BadRequestException with each value that is outside its limits; then nothing is changed
   */
  async change(change: Partial<Retention>, user: SignedInUser): Promise<void> {
    const set = RETENTION_KINDS.filter((kind) => change[kind] !== undefined);
    if (set.length === 0)
      throw new BadRequestException({ errors: [{ path: '', message: 'names nothing to change' }] });
    await this.transactions.run(async (manager) => {
      const before = this.kept;
      const after = this.with(set.map((kind) => ({ kind, keptSeconds: change[kind]! })));
      const errors = retentionProblems(after);
      if (errors.length > 0) throw new BadRequestException({ errors });
      await manager.save(
        RetentionSetting,
        set.map((kind) => ({ kind, keptSeconds: after[kind] })),
      );
      await this.audit.record(manager, {
        user,
        action: 'storage.retention-changed',
        subject: { type: 'storage', id: 'retention' },
        before,
        after,
      });
      // Still inside the queue, so that a change that waits is checked against this one.
      this.kept = after;
    });
  }

  private with(rows: { kind: RetentionSetting['kind']; keptSeconds: number }[]): Retention {
    return { ...this.kept, ...Object.fromEntries(rows.map(({ kind, keptSeconds }) => [kind, keptSeconds])) };
  }
}
