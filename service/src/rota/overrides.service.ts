import { BadRequestException, ForbiddenException, Injectable, NotFoundException } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource, EntityManager } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { may, requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import type { FieldProblem } from '../problem.filter.js';
import { RotaOverride } from './rota-override.entity.js';
import { loadSiteRota, onCallThroughout, type SiteRota } from './site-rota.js';

/** ms */
const DAY = 24 * 3_600_000;
/** Longest time that somebody stands in. */
const LONGEST_OVERRIDE = 92 * DAY;

export interface NewOverride {
  userId: number;
  from: Date;
  to: Date;
  reason: string;
}

/** What speaks against somebody standing in. */
export function overrideProblems(
  rota: SiteRota,
  { userId, from, to }: NewOverride,
  now: Date,
): FieldProblem[] {
  return [
    ...(from < to ? [] : [{ path: 'to', message: 'It must end after it begins' }]),
    ...(to > now ? [] : [{ path: 'to', message: 'It must end in the future' }]),
    ...(to.getTime() - from.getTime() <= LONGEST_OVERRIDE
      ? []
      : [{ path: 'to', message: 'It may last 92 days at most; change the rotation instead' }]),
    ...(rota.available.has(userId)
      ? []
      : [{ path: 'userId', message: `Person ${userId} cannot acknowledge alerts on this site` }]),
  ];
}

/** People who stand in for others. */
@Injectable()
export class OverridesService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly emitter: EventEmitter2,
  ) {}

  /**
   * Lets somebody stand in. Those on call may do so for their own part: they take over themselves, or hand on a time in
   * which nobody but they are on call.
   */
  async add(user: SignedInUser, siteId: number, wanted: NewOverride): Promise<RotaOverride> {
    requireRole(user, siteId, 'rota.override', `site ${siteId}`);
    const now = new Date();
    const rota = await loadSiteRota(this.dataSource.manager, siteId, now);
    const errors = overrideProblems(rota, wanted, now);
    if (errors.length > 0) throw new BadRequestException({ errors });
    const ahead = { from: wanted.from > now ? wanted.from : now, to: wanted.to };
    if (
      !may(user, siteId, 'rota.change') &&
      wanted.userId !== user.id &&
      !onCallThroughout(rota, user.id, ahead)
    )
      throw new ForbiddenException(
        'You may take over yourself or hand on your own time; ask an administrator',
      );
    const override = await this.transactions.run((manager) => this.store(manager, user, siteId, wanted));
    tell(this.emitter, 'rota.changed', { siteId });
    return override;
  }

  /** Writes an override and its entry in the record. */
  async store(
    manager: EntityManager,
    user: SignedInUser,
    siteId: number,
    { userId, from, to, reason }: NewOverride,
  ): Promise<RotaOverride> {
    const saved = await manager.save(
      manager.create(RotaOverride, { siteId, userId, from, to, reason, createdById: user.id }),
    );
    await this.audit.record(manager, {
      user,
      action: 'rota.override-added',
      subject: { type: 'rota', id: siteId },
      siteId,
      note: reason,
      after: { id: saved.id, userId, from, to },
    });
    return saved;
  }

  /** Takes an override away: who made it, who stands in by it, or an administrator. */
  async remove(user: SignedInUser, siteId: number, id: number): Promise<void> {
    requireRole(user, siteId, 'rota.override', `site ${siteId}`);
    await this.transactions.run(async (manager) => {
      const override = await manager.findOneBy(RotaOverride, { id, siteId });
      if (!override) throw new NotFoundException(`There is no override ${id} on this site`);
      if (![override.userId, override.createdById].includes(user.id) && !may(user, siteId, 'rota.change'))
        throw new ForbiddenException('This override is not yours; ask an administrator');
      await manager.delete(RotaOverride, id);
      await this.audit.record(manager, {
        user,
        action: 'rota.override-removed',
        subject: { type: 'rota', id: siteId },
        siteId,
        note: override.reason,
        before: { id, userId: override.userId, from: override.from, to: override.to },
      });
    });
    tell(this.emitter, 'rota.changed', { siteId });
  }
}
