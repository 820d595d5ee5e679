import {
  ConflictException,
  ForbiddenException,
  GoneException,
  Injectable,
  NotFoundException,
} from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { Alert } from '../alerts/alert.entity.js';
import { AlertsService } from '../alerts/alerts.service.js';
import { RULE_TITLES } from '../alerts/rules.js';
import { AuthService } from '../auth/auth.service.js';
import { Transactions } from '../database/transactions.js';
import type { AcknowledgeLink } from '../notifications/acknowledge-link.entity.js';
import { AcknowledgeLinksService } from '../notifications/acknowledge-links.service.js';
import { User } from '../people/user.entity.js';
import type { AcknowledgeLinkDto, LinkState } from './dto/acknowledge.dto.js';

/** Acknowledges by the link of a mail, for the person whom the mail was for. */
@Injectable()
export class LinkAcknowledgementService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly links: AcknowledgeLinksService,
    private readonly alerts: AlertsService,
    private readonly auth: AuthService,
  ) {}

  /**
   * What the link would do. Nothing is changed: mail programs open links by themselves.
   *
   * @throws NotFoundException when the link is none of ours
   */
  async view(token: string, now: Date): Promise<AcknowledgeLinkDto> {
    const { link, alert, person } = await this.find(token);
    const { axis } = alert;
    return {
      state: stateOf(link, alert, now),
      alertId: alert.id,
      person: person.name,
      axisTag: axis.tag,
      axisName: axis.name,
      machineName: axis.machine.name,
      siteName: axis.site.name,
      timeZone: axis.site.timeZone,
      title: RULE_TITLES[alert.rule],
      priority: alert.priority,
      message: alert.message,
      action: alert.action,
      raisedAt: alert.raisedAt.toISOString(),
      acknowledgedBy: alert.acknowledgedBy,
      acknowledgedAt: alert.acknowledgedAt?.toISOString() ?? null,
    };
  }

  /**
   * Acknowledges, once, and uses the link up.
   *
   * @throws GoneException when the link is used or expired
   * @throws ConflictException when the alert waits for nobody any more
   * @throws ForbiddenException when the person has left or may no longer acknowledge there
   */
  async acknowledge(token: string, now: Date): Promise<AcknowledgeLinkDto> {
    const { link, alert } = await this.find(token);
    const state = stateOf(link, alert, now);
    if (state === 'used') throw new GoneException('This link was used already');
    if (state === 'expired') throw new GoneException('This link has expired; sign in to acknowledge');
    if (state === 'over') throw new ConflictException('This alert no longer waits for anybody');
    const user = await this.auth.personById(link.userId);
    if (!user) throw new ForbiddenException('This account is disabled; ask an administrator of your site');
    // Of two at once the alert's life cycle takes the first; refused, the link is not used up.
    await this.alerts.acknowledge(alert.id, user, 'By the link in the mail');
    await this.transactions.run((manager) => this.links.use(manager, link.id, now));
    return this.view(token, now);
  }

  private async find(token: string): Promise<{ link: AcknowledgeLink; alert: Alert; person: User }> {
    const { manager } = this.dataSource;
    const link = await this.links.find(manager, token);
    const alert =
      link &&
      (await manager.findOne(Alert, {
        where: { id: link.alertId },
        relations: { axis: { machine: true, site: true } },
      }));
    const person = link && (await manager.findOneBy(User, { id: link.userId }));
    if (!link || !alert || !person) throw new NotFoundException('There is no such link');
    return { link, alert, person };
  }
}

function stateOf(link: AcknowledgeLink, alert: Alert, now: Date): LinkState {
  if (link.usedAt) return 'used';
  if (link.expiresAt <= now) return 'expired';
  const waits = alert.state === 'unacknowledged' || alert.state === 'returned-unacknowledged';
  return waits && alert.raisedAt.getTime() === link.raisedAt.getTime() ? 'open' : 'over';
}
