import { Injectable } from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { LessThan, MoreThan, type DataSource } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import { tell, type Events } from '../events.js';
import { MoveRecord } from '../indicators/move-record.entity.js';
import { Proposal } from './proposal.entity.js';
import { compareMoves } from './trial.js';

/** Moves looked at: the last ones before the change, the first ones after it. */
const MOVES_BEFORE = 40;
const MOVES_AFTER = 200;

/** Watches trials: whenever an axis on trial closes a window, the same moves before and after are compared again. */
@Injectable()
export class TrialService {
  /** Axes that closed a window since the last look. */
  private readonly toCompare = new Set<number>();

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly emitter: EventEmitter2,
  ) {}

  @OnEvent('window.closed')
  note({ axisId }: Events['window.closed']): void {
    this.toCompare.add(axisId);
  }

  /** One look at the trials for all windows of a checkpoint: a fleet closes hundreds a second, few are on trial. */
  @OnEvent('checkpoint.written')
  async compareNoted(): Promise<void> {
    if (this.toCompare.size === 0) return;
    const noted = new Set(this.toCompare);
    this.toCompare.clear();
    for (const proposal of await this.dataSource.getRepository(Proposal).findBy({ state: 'on trial' }))
      if (noted.has(proposal.axisId)) await this.compare(proposal);
  }

  private async compare(proposal: Proposal): Promise<void> {
    const { axisId } = proposal;
    if (!proposal.appliedAt) return;
    const appliedAt = proposal.appliedAt.getTime() / 1000;
    const moves = this.dataSource.getRepository(MoveRecord);
    const [before, after] = await Promise.all([
      moves.find({
        where: { axisId, revision: proposal.current.revision, t: LessThan(appliedAt) },
        order: { t: 'DESC' },
        take: MOVES_BEFORE,
      }),
      moves.find({
        where: { axisId, revision: proposal.revision!, t: MoreThan(appliedAt) },
        order: { t: 'ASC' },
        take: MOVES_AFTER,
      }),
    ]);
    const trial = compareMoves(before, after, proposal.appliedAt);
    const changed = await this.transactions.run(async (manager) => {
      const found = await manager.findOneByOrFail(Proposal, { id: proposal.id });
      if (found.state !== 'on trial') return false;
      found.trial = trial;
      await manager.save(found);
      return true;
    });
    if (changed)
      tell(this.emitter, 'proposal.changed', { proposalId: proposal.id, axisId, siteId: proposal.siteId });
  }
}
