import { Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import { IsNull, Not, type DataSource, type EntityManager } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { CHECKLIST, siteKey, type ChecklistItem } from './checklist.js';
import { SiteChecklistItem } from './site-checklist.entity.js';

/** The checklist of a site: what holds everywhere, then what its administrator added. */
@Injectable()
export class ChecklistService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
  ) {}

  async of(siteId: number): Promise<ChecklistItem[]> {
    const own = await ownItems(this.dataSource.manager, siteId);
    return [...CHECKLIST, ...own.map(({ id, text }) => ({ key: siteKey(id), text }))];
  }

  /** Replaces what the site added: an unchanged text keeps its key, an altered one is a new item. */
  async replace(siteId: number, texts: string[], user: SignedInUser): Promise<void> {
    requireRole(user, siteId, 'checklist.change', `site ${siteId}`);
    await this.transactions.run(async (manager) => {
      const former = await ownItems(manager, siteId);
      await manager.update(SiteChecklistItem, { siteId }, { place: null });
      for (const [place, text] of texts.entries()) {
        const same = former.find((item) => item.text === text);
        await manager.save(SiteChecklistItem, { ...(same && { id: same.id }), siteId, text, place });
      }
      await this.audit.record(manager, {
        user,
        action: 'site.checklist-changed',
        subject: { type: 'site', id: siteId },
        siteId,
        before: former.map(({ text }) => text),
        after: texts,
      });
    });
  }
}

const ownItems = (manager: EntityManager, siteId: number): Promise<SiteChecklistItem[]> =>
  manager.find(SiteChecklistItem, { where: { siteId, place: Not(IsNull()) }, order: { place: 'ASC' } });
