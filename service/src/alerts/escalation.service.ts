import { Injectable } from '@nestjs/common';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { LessThanOrEqual, type DataSource } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import { RotaService } from '../rota/rota.service.js';
import { AlertNoticesService } from './alert-notices.service.js';
import { Alert, AlertEvent } from './alert.entity.js';
import { AlertsService } from './alerts.service.js';

/** Each later step waits this many times the rule's delay; after the last one the alert stands without more mails. */
const STEP_FACTORS = [2, 4, 8, 16];

/** Tells the person on call by mail about alerts that nobody acknowledged, again and again until somebody does. */
@Injectable()
export class EscalationService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly alerts: AlertsService,
    private readonly rota: RotaService,
    private readonly notices: AlertNoticesService,
  ) {}

  @Interval(1_000)
  async tellDue(): Promise<void> {
    const due = await this.dataSource.getRepository(Alert).find({
      where: { state: 'unacknowledged', nextStepAt: LessThanOrEqual(new Date()) },
      relations: { axis: { machine: true, site: true } },
      order: { nextStepAt: 'ASC' },
      take: 100,
    });
    for (const alert of due) await this.tell(alert);
  }

  private async tell(alert: Alert): Promise<void> {
    const at = new Date();
    const onCall = await this.rota.onCall(alert.siteId, at);
    const factor = STEP_FACTORS[alert.stepsTaken];
    const settings = this.alerts.settingsOf(alert.rule);
    await this.transactions.run(async (manager) => {
      // Somebody may have acknowledged it since it was found due.
      const fresh = await manager.findOneBy(Alert, { id: alert.id, state: 'unacknowledged' });
      if (!fresh || fresh.stepsTaken !== alert.stepsTaken) return;
      const ways = onCall && (await this.notices.tell(manager, alert, onCall, alert.stepsTaken + 1, at));
      await manager.save(AlertEvent, {
        alertId: alert.id,
        at,
        by: 'service',
        action: onCall ? 'told' : 'nobody on call',
        note: onCall ? `${onCall.name} by ${ways}` : 'The rota has a gap: nobody could be told',
      });
      fresh.stepsTaken++;
      fresh.nextStepAt =
        factor === undefined ? null : new Date(at.getTime() + factor * settings.mailAfter * 1000);
      await manager.save(fresh);
    });
  }
}
