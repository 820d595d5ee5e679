import { Injectable } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { HandoverNote } from './handover-note.entity.js';

/** What the people on call leave for each other. */
@Injectable()
export class HandOverNotesService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly emitter: EventEmitter2,
  ) {}

  /** Hand-over notes, newest first. */
  async list(
    user: SignedInUser,
    siteId: number,
    { limit, beforeId }: { limit: number; beforeId?: number },
  ): Promise<{ items: HandoverNote[]; nextCursor: string | null }> {
    requireRole(user, siteId, 'see', `site ${siteId}`);
    const query = this.dataSource
      .getRepository(HandoverNote)
      .createQueryBuilder('note')
      .innerJoinAndSelect('note.user', 'user')
      .where('note.siteId = :siteId', { siteId })
      .orderBy('note.id', 'DESC')
      .limit(limit + 1);
    if (beforeId) query.andWhere('note.id < :beforeId', { beforeId });
    const found = await query.getMany();
    const items = found.slice(0, limit);
    return { items, nextCursor: found.length > limit ? String(items.at(-1)?.id) : null };
  }

  async add(user: SignedInUser, siteId: number, text: string): Promise<HandoverNote> {
    requireRole(user, siteId, 'note.write', `site ${siteId}`);
    const note = await this.transactions.run((manager) =>
      manager.save(manager.create(HandoverNote, { siteId, at: new Date(), userId: user.id, text })),
    );
    tell(this.emitter, 'rota.changed', { siteId });
    return note;
  }
}
