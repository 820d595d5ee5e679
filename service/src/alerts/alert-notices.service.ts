import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import type { EntityManager } from 'typeorm';
import type { Axis } from '../fleet/axis.entity.js';
import { stripPoint } from '../fleet/strip-point.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import { AcknowledgeLinksService } from '../notifications/acknowledge-links.service.js';
import { axisPicture } from '../notifications/axis-picture.js';
import { MailOutboxService } from '../notifications/mail-outbox.service.js';
import { QuickNoticesService } from '../notifications/quick-notices.service.js';
import type { Settings } from '../settings.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { alertMail } from './alert-mail.js';
import type { Alert } from './alert.entity.js';
import { RULE_TITLES } from './rules.js';

/** Who is told. */
export interface Told {
  userId: number;
  name: string;
  email: string;
}

/** Tells one person of one alert, by every way that reaches them. */
@Injectable()
export class AlertNoticesService {
  constructor(
    private readonly outbox: MailOutboxService,
    private readonly quick: QuickNoticesService,
    private readonly links: AcknowledgeLinksService,
    private readonly recent: RecentSeconds,
    private readonly intake: IntakeService,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  /**
   * Writes what is to go out, in the unit of work of the step that tells.
   *
   * @param alert with its axis, machine and site
   * @param step such as "step 2": what this is, once while the alert stands
   * @param number how many times the person on call has been told with this
   * @returns the ways in words, such as "mail, push"
   */
  async tell(
    manager: EntityManager,
    alert: Alert,
    person: Told,
    step: string,
    number: number,
    at: Date,
  ): Promise<string> {
    // After a shelf or maintenance its steps are taken anew: what they say is no copy of what was said before.
    const key = `alert ${alert.id} since ${(alert.standsSince ?? alert.raisedAt).getTime()} ${step}`;
    const acknowledgeUrl = await this.links.make(manager, alert, person.userId, at);
    const publicUrl = this.config.get('PUBLIC_URL', { infer: true });
    await this.outbox.enqueue(manager, {
      key,
      to: person.email,
      alertId: alert.id,
      siteId: alert.siteId,
      picture: this.pictureOf(alert.axis),
      ...alertMail(alert, number, publicUrl, acknowledgeUrl),
    });
    const quick = await this.quick.tell(
      manager,
      {
        key,
        userId: person.userId,
        title: `${alert.axis.tag}: ${RULE_TITLES[alert.rule]}`,
        body: `${alert.message} Do: ${alert.action}`,
        alertId: alert.id,
        siteId: alert.siteId,
      },
      at,
    );
    return ['mail', ...quick].join(', ');
  }

  private pictureOf(axis: Axis): { svg: string; text: string } {
    const estimate = this.intake.pipeline(axis.id)?.estimate;
    const { baseline } = axis;
    return axisPicture({
      tag: axis.tag,
      drift:
        estimate && baseline
          ? {
              gainRatio: estimate.gain.value / baseline.gain,
              poleRatio: estimate.pole.value / baseline.pole,
              covariance: estimate.lnCovariance,
            }
          : null,
      tolerances: axis.tolerances,
      seconds: this.recent.of(axis.id).map(stripPoint),
    });
  }
}
