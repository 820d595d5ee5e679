import {
  ConflictException,
  Injectable,
  NotFoundException,
  type OnApplicationBootstrap,
} from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { Gauge } from 'prom-client';
import { In, Not, type DataSource, type EntityManager } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import type { Action } from '../auth/policy.js';
import { requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell, type Events } from '../events.js';
import { Axis } from '../fleet/axis.entity.js';
import { Proposal } from '../proposals/proposal.entity.js';
import { AxesAtHand } from '../telemetry/axes-at-hand.js';
import { AlertRule } from './alert-rule.entity.js';
import { Alert, AlertEvent } from './alert.entity.js';
import { AxisLevelsService } from './axis-levels.service.js';
import { nextState, type AlertStep } from './life-cycle.js';
import {
  lookAtLevel,
  RULE,
  RULES,
  type AxisLevels,
  type RuleName,
  type RuleSettings,
  type RuleTimer,
} from './rules.js';

const openAlerts = new Gauge({ name: 'polewright_alerts_open', help: 'Alerts that are not over' });

/** Raises, clears and carries alerts through their life. One alert per axis and rule stands at a time. */
@Injectable()
export class AlertsService implements OnApplicationBootstrap {
  private readonly timers = new Map<string, RuleTimer>();
  private settings = new Map<RuleName, RuleSettings>();
  private looking = false;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly levels: AxisLevelsService,
    private readonly axes: AxesAtHand,
    private readonly audit: AuditService,
    private readonly emitter: EventEmitter2,
  ) {}

  async onApplicationBootstrap(): Promise<void> {
    await this.loadRules();
    for (const { axisId, rule, returnedAt, state } of await this.open())
      this.timer(axisId, rule).active = returnedAt === null && state !== 'normal';
  }

  /** Reads the rules' settings; those that the table does not have yet are put there. */
  async loadRules(): Promise<void> {
    const repository = this.dataSource.getRepository(AlertRule);
    const stored = new Map((await repository.find()).map((row) => [row.rule, row]));
    const missing = RULES.filter((rule) => !stored.has(rule)).map((rule) => ({
      rule,
      ...RULE[rule].defaults,
    }));
    if (missing.length > 0) for (const row of await repository.save(missing)) stored.set(row.rule, row);
    this.settings = new Map(stored);
  }

  settingsOf(rule: RuleName): RuleSettings {
    return this.settings.get(rule) ?? RULE[rule].defaults;
  }

  open(): Promise<Alert[]> {
    return this.dataSource.getRepository(Alert).findBy({ state: Not('normal') });
  }

  /** After each checkpoint every axis is looked at once by every rule. */
  @OnEvent('checkpoint.written')
  async lookAtAll({ at }: Events['checkpoint.written']): Promise<void> {
    if (this.looking || this.settings.size === 0) return;
    this.looking = true;
    try {
      const open = new Map((await this.open()).map((alert) => [`${alert.axisId} ${alert.rule}`, alert]));
      openAlerts.set(open.size);
      const trials = new Map(
        (await this.dataSource.getRepository(Proposal).findBy({ state: 'on trial' })).map((proposal) => [
          proposal.axisId,
          proposal.trial?.verdict ?? 'waiting',
        ]),
      );
      for (const axis of await this.axes.all()) {
        const levels = this.levels.of(axis, at, trials.get(axis.id) ?? null);
        for (const rule of RULES) await this.lookAt(axis, rule, levels, at, open.get(`${axis.id} ${rule}`));
      }
      for (const alert of open.values())
        if (alert.state === 'shelved' && alert.shelvedUntil && alert.shelvedUntil <= at)
          await this.step(alert.id, 'unshelve', null, { note: 'The shelf ended' });
    } finally {
      this.looking = false;
    }
  }

  private async lookAt(
    axis: Axis,
    rule: RuleName,
    levels: AxisLevels,
    at: Date,
    open: Alert | undefined,
  ): Promise<void> {
    const { measure, tolerance, relative } = RULE[rule];
    const settings = this.settingsOf(rule);
    const timer = this.timer(axis.id, rule);
    const value = measure(levels);
    const scale = relative ? tolerance(levels) : 1;
    const threshold = settings.threshold * scale;
    const verdict = lookAtLevel(
      timer,
      value,
      threshold,
      settings.deadband * scale,
      settings,
      at.getTime() / 1000,
    );
    if (axis.inMaintenance) {
      if (open && open.state !== 'suppressed' && open.state !== 'normal' && rule !== 'trial-regression')
        await this.step(open.id, 'suppress', null, { note: 'The axis is in maintenance' });
      return;
    }
    if (open?.state === 'suppressed')
      await this.step(open.id, 'unsuppress', null, {
        note: 'The axis is out of maintenance',
        holding: timer.active,
      });
    if (verdict === 'raise' || (timer.active && !open))
      await this.raise(axis, rule, value ?? threshold, threshold, levels, at);
    else if (verdict === 'clear' && open) await this.step(open.id, 'clear', null, { at });
  }

  private async raise(
    axis: Axis,
    rule: RuleName,
    value: number,
    threshold: number,
    levels: AxisLevels,
    at: Date,
  ): Promise<void> {
    const settings = this.settingsOf(rule);
    const alert = await this.transactions.run(async (manager) => {
      const standing = await manager.findOneBy(Alert, { axisId: axis.id, rule, state: Not('normal') });
      if (standing && nextState(standing.state, 'raise', true) === null) return null;
      const raised = await manager.save(
        Object.assign(standing ?? new Alert(), {
          siteId: axis.siteId,
          axisId: axis.id,
          rule,
          priority: settings.priority,
          state: 'unacknowledged',
          raisedAt: at,
          acknowledgedAt: null,
          acknowledgedBy: null,
          returnedAt: null,
          value,
          threshold,
          message: RULE[rule].message(value, threshold, levels),
          action: RULE[rule].action(levels),
          stepsTaken: 0,
          nextStepAt: new Date(at.getTime() + settings.mailAfter * 1000),
        } satisfies Partial<Alert>),
      );
      await this.note(manager, raised.id, 'service', 'raised', raised.message, at);
      await this.audit.record(manager, {
        user: null,
        action: 'alert.raised',
        subject: { type: 'alert', id: raised.id },
        siteId: axis.siteId,
        note: `${axis.tag}: ${raised.message}`,
      });
      return raised;
    });
    if (!alert) return;
    tell(this.emitter, 'alert.raised', { alertId: alert.id, axisId: axis.id, siteId: axis.siteId });
    tell(this.emitter, 'alert.changed', { alertId: alert.id, axisId: axis.id, siteId: axis.siteId });
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
    await this.step(id, 'acknowledge', user, { note });
  }

  async shelve(id: number, user: SignedInUser, until: Date, reason: string): Promise<void> {
    await this.get(id, user, 'alert.shelve');
    await this.step(id, 'shelve', user, { note: reason, until });
  }

  async unshelve(id: number, user: SignedInUser): Promise<void> {
    await this.get(id, user, 'alert.shelve');
    await this.step(id, 'unshelve', user, {});
  }

  async addNote(id: number, user: SignedInUser, text: string): Promise<void> {
    const alert = await this.get(id, user, 'alert.note');
    await this.transactions.run((manager) => this.note(manager, id, user.name, 'noted', text, new Date()));
    tell(this.emitter, 'alert.changed', { alertId: id, axisId: alert.axisId, siteId: alert.siteId });
  }

  /**
   * Takes one step of the life cycle and writes it down. Where the alert's state does not allow it nothing changes:
   * the service itself goes on with the next alert (a shelved one does not clear, it ends with its shelf).
   *
   * @throws ConflictException when a person asked for what the state does not allow
   */
  private async step(
    id: number,
    step: AlertStep,
    user: SignedInUser | null,
    {
      note = null,
      until,
      at = new Date(),
      holding,
    }: { note?: string | null; until?: Date; at?: Date; holding?: boolean },
  ): Promise<void> {
    const alert = await this.transactions.run(async (manager) => {
      const found = await manager.findOneByOrFail(Alert, { id });
      const before = found.state;
      const next = nextState(before, step, holding ?? this.timer(found.axisId, found.rule).active);
      if (next === null && !user) return null;
      if (next === null)
        throw new ConflictException(
          `Alert ${id} is ${before.replaceAll('-', ' ')}; it cannot be ${PAST[step]} now`,
        );
      found.state = next;
      if (step === 'acknowledge') {
        found.acknowledgedAt = at;
        found.acknowledgedBy = user?.name ?? 'service';
        found.nextStepAt = null;
      }
      if (step === 'clear') found.returnedAt = at;
      if (step === 'shelve')
        Object.assign(found, {
          shelvedUntil: until,
          shelvedBy: user?.name ?? null,
          shelveReason: note,
          nextStepAt: null,
        });
      if (step === 'unshelve' || step === 'unsuppress') {
        Object.assign(found, { shelvedUntil: null, shelvedBy: null, shelveReason: null });
        if (next === 'unacknowledged')
          Object.assign(found, {
            acknowledgedAt: null,
            acknowledgedBy: null,
            returnedAt: null,
            nextStepAt: new Date(at.getTime() + this.settingsOf(found.rule).mailAfter * 1000),
          });
      }
      if (step === 'suppress') Object.assign(found, { nextStepAt: null, shelvedUntil: null });
      if (next === 'normal') {
        found.nextStepAt = null;
        found.returnedAt ??= at; // it went while it was shelved or suppressed
      }
      await manager.save(found);
      await this.note(manager, id, user?.name ?? 'service', PAST[step], note, at);
      await this.audit.record(manager, {
        user,
        action: `alert.${PAST[step].replaceAll(' ', '-')}`,
        subject: { type: 'alert', id },
        siteId: found.siteId,
        note,
        before: { state: before },
        after: { state: next },
      });
      return found;
    });
    if (!alert) return;
    tell(this.emitter, 'alert.changed', { alertId: id, axisId: alert.axisId, siteId: alert.siteId });
  }

  private async note(
    manager: EntityManager,
    alertId: number,
    by: string,
    action: string,
    note: string | null,
    at: Date,
  ): Promise<void> {
    await manager.save(AlertEvent, { alertId, by, action, note, at });
  }

  /** Changes a rule for everybody from now on. */
  async changeRule(rule: RuleName, change: Partial<RuleSettings>, user: SignedInUser): Promise<void> {
    const before = this.settingsOf(rule);
    const after = { ...before, ...change };
    await this.transactions.run(async (manager) => {
      await manager.save(AlertRule, { rule, ...after });
      await this.audit.record(manager, {
        user,
        action: 'alert-rule.changed',
        subject: { type: 'alert-rule', id: rule },
        before: { ...before },
        after: { ...after },
      });
    });
    this.settings.set(rule, after);
  }

  /** Rules whose alert stands on each axis, shelved and suppressed ones left out. */
  async standingRules(): Promise<Map<number, string[]>> {
    const standing = await this.dataSource.getRepository(Alert).find({
      select: { axisId: true, rule: true },
      where: { state: In(['unacknowledged', 'acknowledged']) },
    });
    const byAxis = new Map<number, string[]>();
    for (const { axisId, rule } of standing) byAxis.set(axisId, [...(byAxis.get(axisId) ?? []), rule]);
    return byAxis;
  }

  private timer(axisId: number, rule: RuleName): RuleTimer {
    const key = `${axisId} ${rule}`;
    let timer = this.timers.get(key);
    if (!timer) this.timers.set(key, (timer = { active: false, since: null }));
    return timer;
  }
}

const PAST: Record<AlertStep, string> = {
  raise: 'raised',
  clear: 'returned to normal',
  acknowledge: 'acknowledged',
  shelve: 'shelved',
  unshelve: 'taken off the shelf',
  suppress: 'suppressed',
  unsuppress: 'no longer suppressed',
};
