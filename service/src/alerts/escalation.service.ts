import { Injectable } from '@nestjs/common';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, LessThanOrEqual, type DataSource, type EntityManager } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import { groupBy } from '../group-by.js';
import { UserRole } from '../people/user-role.entity.js';
import { RotaService } from '../rota/rota.service.js';
import { AlertNoticesService, type Told } from './alert-notices.service.js';
import { insertAll } from './alert-steps.service.js';
import { Alert, AlertEvent } from './alert.entity.js';
import { LATER_STEPS, quietUntil } from './escalation-steps.js';

/** Alerts told about in one unit of work. */
const AT_ONCE = 500;
/** While nobody is on call, ms until it is looked at again whether somebody is. */
const LOOK_AGAIN = 30_000;

/** Who can be told on a site at one moment. */
interface Reachable {
  onCall: Told | null;
  /** Who administers the site: they are told when nobody is on call, and by later steps. */
  fallback: Told[];
}

/** What a step did: how the alert goes on, and what is written down about it. */
interface Step {
  alertId: number;
  after: Partial<Pick<Alert, 'stepsTaken' | 'nextStepAt' | 'fallbackToldAt'>>;
  events: { action: string; note: string }[];
}

/** Tells the person on call about alerts that nobody acknowledged, step by step until somebody does. */
@Injectable()
export class EscalationService {
  private telling = false;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly rota: RotaService,
    private readonly notices: AlertNoticesService,
  ) {}

  /** Takes every step that is due. */
  @Interval(1_000)
  async tellDue(at = new Date()): Promise<void> {
    if (this.telling) return;
    this.telling = true;
    try {
      while ((await this.tellSome(at)) === AT_ONCE);
    } finally {
      this.telling = false;
    }
  }

  private async tellSome(at: Date): Promise<number> {
    const found = await this.dataSource
      .getRepository(Alert)
      .countBy({ state: 'unacknowledged', nextStepAt: LessThanOrEqual(at) });
    if (found === 0) return 0;
    // Read within the unit of work: nobody can acknowledge between the look and the step.
    return this.transactions.run(async (manager) => {
      const due = await manager.find(Alert, {
        where: { state: 'unacknowledged', nextStepAt: LessThanOrEqual(at) },
        relations: { axis: { machine: true, site: true } },
        order: { nextStepAt: 'ASC', id: 'ASC' },
        take: AT_ONCE,
      });
      const steps: Step[] = [];
      for (const [siteId, alerts] of groupBy(due, (alert) => alert.siteId)) {
        const reachable = {
          onCall: await this.rota.onCall(siteId, at),
          fallback: await this.fallbackOf(manager, siteId),
        };
        for (const alert of alerts) steps.push(await this.step(manager, alert, reachable, at));
      }
      for (const same of groupBy(steps, ({ after }) => JSON.stringify(after)).values())
        await manager.update(Alert, { id: In(same.map(({ alertId }) => alertId)) }, same[0]!.after);
      await insertAll(
        manager,
        AlertEvent,
        steps.flatMap(({ alertId, events }) =>
          events.map((event) => ({ alertId, at, by: 'service', ...event })),
        ),
      );
      return due.length;
    });
  }

  private async step(manager: EntityManager, alert: Alert, reachable: Reachable, at: Date): Promise<Step> {
    const alertId = alert.id;
    const quiet = alert.priority === 'low' ? quietUntil(at, alert.axis.site.timeZone) : null;
    if (quiet) return { alertId, after: { nextStepAt: quiet }, events: [] };
    return reachable.onCall
      ? this.takeStep(manager, alert, reachable.onCall, reachable.fallback, at)
      : this.tellFallback(manager, alert, reachable.fallback, at);
  }

  private async takeStep(
    manager: EntityManager,
    alert: Alert,
    onCall: Told,
    fallback: readonly Told[],
    at: Date,
  ): Promise<Step> {
    const later = LATER_STEPS[alert.priority];
    const stepsTaken = alert.stepsTaken + 1;
    const withFallback = later[alert.stepsTaken - 1]?.to === 'on call and fallback';
    const others = withFallback ? fallback.filter(({ userId }) => userId !== onCall.userId) : [];
    const next = later[alert.stepsTaken];
    return {
      alertId: alert.id,
      after: { stepsTaken, nextStepAt: next ? new Date(at.getTime() + next.after * 1000) : null },
      events: await this.tell(manager, alert, [onCall, ...others], `step ${stepsTaken}`, stepsTaken, at),
    };
  }

  /** In a gap of the rota the fallback is told, and again as later steps would be; the step itself is not used up. */
  private async tellFallback(
    manager: EntityManager,
    alert: Alert,
    fallback: readonly Told[],
    at: Date,
  ): Promise<Step> {
    const again = LATER_STEPS[alert.priority][alert.stepsTaken]?.after;
    const nextStepAt = new Date(at.getTime() + LOOK_AGAIN);
    const last = alert.fallbackToldAt?.getTime();
    if (last !== undefined && (again === undefined || at.getTime() - last < again * 1000))
      return { alertId: alert.id, after: { nextStepAt }, events: [] };
    const gap = {
      action: 'nobody on call',
      note:
        fallback.length > 0
          ? 'The rota has a gap: the site’s administrators are told'
          : 'The rota has a gap, and nobody administers the site: nobody could be told',
    };
    const told = await this.tell(manager, alert, fallback, `gap ${at.getTime()}`, alert.stepsTaken + 1, at);
    return { alertId: alert.id, after: { nextStepAt, fallbackToldAt: at }, events: [gap, ...told] };
  }

  private async tell(
    manager: EntityManager,
    alert: Alert,
    people: readonly Told[],
    step: string,
    number: number,
    at: Date,
  ): Promise<Step['events']> {
    const events: Step['events'] = [];
    for (const person of people) {
      const ways = await this.notices.tell(manager, alert, person, `${step} to ${person.userId}`, number, at);
      events.push({ action: 'told', note: `${person.name} by ${ways}` });
    }
    return events;
  }

  private async fallbackOf(manager: EntityManager, siteId: number): Promise<Told[]> {
    const roles = await manager.find(UserRole, {
      where: { siteId, role: 'administrator', user: { disabled: false } },
      relations: { user: true },
      order: { userId: 'ASC' },
    });
    return roles.map(({ user: { id, name, email } }) => ({ userId: id, name, email }));
  }
}
