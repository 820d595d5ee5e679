import { Injectable, NotFoundException } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, type DataSource } from 'typeorm';
import type { Action } from '../auth/policy.js';
import { requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { Alert, AlertEvent, PRIORITIES, type AlertState } from './alert.entity.js';
import { AlertRulesService } from './alert-rules.service.js';
import { AlertSteps, type StepOrder } from './alert-steps.service.js';

/** Order of what is open: what needs a person first. */
const URGENCY: AlertState[] = [
  'unacknowledged',
  'returned-unacknowledged',
  'acknowledged',
  'shelved',
  'suppressed',
  'out-of-service',
];

/** Rank of a column's value in a list, as SQL. */
const rankOf = (column: string, values: readonly string[]): string =>
  `CASE ${column} ${values.map((value, rank) => `WHEN '${value}' THEN ${rank}`).join(' ')} ELSE ${values.length} END`;

export interface AlertFilter {
  siteIds: number[];
  state: AlertState | 'open';
  axisId?: number;
  limit: number;
  /** Rows to leave out at the start of what is open; or the number that past alerts come before, 0 for none. */
  from: number;
}

/** What people see of alerts and do with them. One alert per axis and rule stands at a time. */
@Injectable()
export class AlertsService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly rules: AlertRulesService,
    private readonly steps: AlertSteps,
    private readonly emitter: EventEmitter2,
  ) {}

  /** One more than `limit` alerts, if there are: what is open by urgency, else newest first. */
  async list({ siteIds, state, axisId, limit, from }: AlertFilter): Promise<Alert[]> {
    const query = this.dataSource
      .getRepository(Alert)
      .createQueryBuilder('alert')
      .select('alert.id', 'id')
      .where('alert.siteId IN (:...siteIds)', { siteIds: [-1, ...siteIds] });
    if (axisId !== undefined) query.andWhere('alert.axisId = :axisId', { axisId });
    if (state === 'open')
      query
        .andWhere(`alert.state <> 'normal'`)
        .orderBy(rankOf('alert.state', URGENCY))
        .addOrderBy(rankOf('alert.priority', PRIORITIES))
        .addOrderBy('alert.raisedAt', 'DESC')
        .offset(from);
    else {
      query.andWhere('alert.state = :state', { state });
      if (from > 0) query.andWhere('alert.id < :from', { from });
    }
    const rows = await query
      .addOrderBy('alert.id', 'DESC')
      .limit(limit + 1)
      .getRawMany<{ id: number }>();
    const ids = rows.map(({ id }) => id);
    const alerts = await this.dataSource.getRepository(Alert).find({
      where: { id: In(ids) },
      relations: { axis: { machine: true, site: true }, events: true },
    });
    return alerts.sort((a, b) => ids.indexOf(a.id) - ids.indexOf(b.id));
  }

  /** An alert that the person may see; what they may not see does not exist for them. */
  async get(id: number, user: SignedInUser, action: Action | 'see' = 'see'): Promise<Alert> {
    const alert = await this.dataSource.getRepository(Alert).findOne({
      where: { id },
      relations: { axis: { machine: true, site: true }, events: true },
    });
    if (!alert) throw new NotFoundException(`There is no alert ${id}`);
    requireRole(user, alert.siteId, action, `alert ${id}`);
    return alert;
  }

  async acknowledge(id: number, user: SignedInUser, note: string | null): Promise<void> {
    await this.get(id, user, 'alert.acknowledge');
    await this.step({ alertId: id, step: 'acknowledge', note }, user);
  }

  async shelve(id: number, user: SignedInUser, until: Date, reason: string): Promise<void> {
    await this.get(id, user, 'alert.shelve');
    await this.step({ alertId: id, step: 'shelve', note: reason, until }, user);
  }

  async unshelve(id: number, user: SignedInUser): Promise<void> {
    await this.get(id, user, 'alert.shelve');
    await this.step({ alertId: id, step: 'unshelve' }, user);
  }

  /** Until a person returns it to service nothing is told about this axis by this rule. */
  async takeOutOfService(id: number, user: SignedInUser, reason: string): Promise<void> {
    await this.get(id, user, 'alert.out-of-service');
    await this.step({ alertId: id, step: 'take-out-of-service', note: reason }, user);
  }

  async returnToService(id: number, user: SignedInUser): Promise<void> {
    await this.get(id, user, 'alert.out-of-service');
    await this.step({ alertId: id, step: 'return-to-service' }, user);
  }

  async addNote(id: number, user: SignedInUser, text: string): Promise<void> {
    const alert = await this.get(id, user, 'alert.note');
    await this.transactions.run((manager) =>
      manager.save(AlertEvent, { alertId: id, by: user.name, action: 'noted', note: text, at: new Date() }),
    );
    tell(this.emitter, 'alert.changed', { alertId: id, axisId: alert.axisId, siteId: alert.siteId });
  }

  private async step(order: StepOrder, user: SignedInUser): Promise<void> {
    const done = await this.transactions.run((manager) =>
      this.steps.take(
        manager,
        { steps: [order] },
        user,
        new Date(),
        (rule) => this.rules.settingsOf(rule).mailAfter,
      ),
    );
    this.steps.announce(done);
  }
}
