import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { LessThanOrEqual, type DataSource } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import { MailOutboxService } from '../notifications/mail-outbox.service.js';
import { RotaService } from '../rota/rota.service.js';
import type { Settings } from '../settings.js';
import { alertMail } from './alert-mail.js';
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
    private readonly outbox: MailOutboxService,
    private readonly config: ConfigService<Settings, true>,
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
      if (onCall)
        await this.outbox.enqueue(manager, {
          key: `alert ${alert.id} raised ${alert.raisedAt.getTime()} step ${alert.stepsTaken + 1}`,
          to: onCall.email,
          alertId: alert.id,
          ...alertMail(alert, alert.stepsTaken + 1, this.config.get('PUBLIC_URL', { infer: true })),
        });
      await manager.save(AlertEvent, {
        alertId: alert.id,
        at,
        by: 'service',
        action: onCall ? 'told' : 'nobody on call',
        note: onCall ? `${onCall.name} by mail` : 'The rota has a gap: nobody could be told',
      });
      fresh.stepsTaken++;
      fresh.nextStepAt =
        factor === undefined ? null : new Date(at.getTime() + factor * settings.mailAfter * 1000);
      await manager.save(fresh);
    });
  }
}
