import { Injectable, type OnApplicationBootstrap } from '@nestjs/common';
import { OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { Gauge } from 'prom-client';
import type { DataSource, EntityManager } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import type { Events } from '../events.js';
import type { Axis } from '../fleet/axis.entity.js';
import { Proposal } from '../proposals/proposal.entity.js';
import { AxesAtHand } from '../telemetry/axes-at-hand.js';
import type { AlertState } from './alert.entity.js';
import { AlertRulesService } from './alert-rules.service.js';
import { AlertSteps, insertAll, type NewAlert, type Shown, type StepOrder } from './alert-steps.service.js';
import { AlertTimer } from './alert-timer.entity.js';
import { AxisLevelsService } from './axis-levels.service.js';
import { GatewaySilence } from './gateway-silence.service.js';
import { stepsDue, type AlertStep } from './life-cycle.js';
import {
  actionOf,
  idleTimer,
  lookAtLevel,
  RULE,
  RULES,
  thresholdOn,
  type AxisLevels,
  type RuleName,
  type RuleTimer,
} from './rules.js';

/** A gateway silent for this long, s, may be down: whether one of its axes is silent by itself is not yet known. */
const GATEWAY_IN_DOUBT = 3;

const openAlerts = new Gauge({ name: 'polewright_alerts_open', help: 'Alerts that are not over' });

/** What a look needs of an open alert. */
interface OpenAlert {
  id: number;
  axisId: number;
  rule: RuleName;
  state: AlertState;
  over: boolean;
  shelvedUntil: Date | null;
  gatewayId: number | null;
}

/** A gateway that is known down, and the axis whose alert speaks for it. */
interface DownGateway {
  id: number;
  name: string;
  silence: number;
  leadId: number | null;
  axes: number;
}

const key = (axisId: number, rule: RuleName): string => `${axisId} ${rule}`;
/** A time as TypeORM stores it in SQLite. */
const stored = (text: string | null): Date | null =>
  text === null ? null : new Date(`${text.replace(' ', 'T')}Z`);

/** Looks at every axis by every rule at each beat, and does what the life cycle wants, in one unit of work. */
@Injectable()
export class AlertWatch implements OnApplicationBootstrap {
  private readonly timers = new Map<string, RuleTimer>();
  private readonly unwritten = new Set<string>();
  private looking = false;
  private ready = false;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly rules: AlertRulesService,
    private readonly levels: AxisLevelsService,
    private readonly gateways: GatewaySilence,
    private readonly axes: AxesAtHand,
    private readonly steps: AlertSteps,
  ) {}

  /** Takes up the timers where the last run left them; an open alert without one holds unless it has returned. */
  async onApplicationBootstrap(): Promise<void> {
    await this.rules.load();
    for (const { axisId, rule, over } of await this.open())
      this.timers.set(key(axisId, rule), { ...idleTimer(), active: !over });
    for (const { axisId, rule, active, since, unknownSince } of await this.dataSource
      .getRepository(AlertTimer)
      .find())
      this.timers.set(key(axisId, rule), { active, since, unknownSince });
    this.ready = true;
  }

  @OnEvent('checkpoint.written')
  async lookAtAll({ at }: Events['checkpoint.written']): Promise<void> {
    if (this.looking || !this.ready) return;
    this.looking = true;
    try {
      await this.look(at);
    } finally {
      this.looking = false;
    }
  }

  private async look(at: Date): Promise<void> {
    const open = new Map((await this.open()).map((alert) => [key(alert.axisId, alert.rule), alert]));
    openAlerts.set(open.size);
    const trials = new Map(
      (await this.dataSource.getRepository(Proposal).findBy({ state: 'on trial' })).map((proposal) => [
        proposal.axisId,
        proposal.trial?.verdict ?? 'waiting',
      ]),
    );
    const axes = await this.axes.all();
    const { down, inDoubt } = this.silentGateways(axes, open, at);
    const raise: NewAlert[] = [];
    const orders: StepOrder[] = [];
    for (const axis of axes) {
      const levels = this.levels.of(axis, at, trials.get(axis.id) ?? null);
      for (const rule of RULES) {
        if (rule === 'no-signal' && inDoubt.has(axis.id)) continue;
        const alert = open.get(key(axis.id, rule)) ?? null;
        const { holds, clearing, forgotten } = this.lookAtTimer(axis, rule, levels, at);
        const gateway = rule === 'no-signal' ? (down.get(axis.id) ?? null) : null;
        const suppression =
          axis.inMaintenance && !RULE[rule].alsoInMaintenance
            ? 'maintenance'
            : gateway && gateway.leadId !== axis.id
              ? 'gateway'
              : null;
        const shelfOver =
          alert?.state === 'shelved' && alert.shelvedUntil !== null && alert.shelvedUntil <= at;
        const why =
          suppression === 'gateway'
            ? `Gateway ${gateway!.name} is down`
            : suppression && 'The axis is in maintenance';
        const speaksFor = gateway?.leadId === axis.id ? gateway : null;
        for (const step of stepsDue(alert, { holds, clearing, suppression, shelfOver })) {
          const shown = step === 'raise' ? this.shown(rule, axis, levels, speaksFor) : undefined;
          if (alert) orders.push({ alertId: alert.id, step, shown, note: noteOf(step, why, forgotten) });
          else raise.push({ siteId: axis.siteId, axisId: axis.id, rule, tag: axis.tag, ...shown! });
        }
      }
    }
    if (raise.length + orders.length + this.unwritten.size === 0) return;
    const done = await this.transactions.run(async (manager) => {
      const taken = await this.steps.take(
        manager,
        { raise, steps: orders },
        null,
        at,
        (rule) => this.rules.settingsOf(rule).mailAfter,
      );
      await this.writeTimers(manager);
      return taken;
    });
    this.unwritten.clear();
    this.steps.announce(done);
  }

  /** Moves the timer of an axis and rule on, and remembers whether it must be written. */
  private lookAtTimer(
    axis: Axis,
    rule: RuleName,
    levels: AxisLevels,
    at: Date,
  ): { holds: boolean; clearing: boolean; forgotten: boolean } {
    const name = key(axis.id, rule);
    let timer = this.timers.get(name);
    if (!timer) this.timers.set(name, (timer = idleTimer()));
    const { active, since, unknownSince } = timer;
    const settings = this.rules.settingsOf(rule);
    const { threshold, deadband } = thresholdOn(rule, settings, levels);
    const value = RULE[rule].measure(levels);
    const verdict = lookAtLevel(timer, value, threshold, deadband, settings, at.getTime() / 1000);
    if (active !== timer.active || since !== timer.since || unknownSince !== timer.unknownSince)
      this.unwritten.add(name);
    return {
      holds: timer.active,
      clearing: timer.active && timer.since !== null,
      forgotten: verdict === 'clear' && value === null,
    };
  }

  /**
   * The gateways that are known down, by the axes they serve, and the axes whose gateway may be. Of several axes one
   * speaks for the gateway: the one whose alert does already, else one without an alert of its own that a person put
   * aside. A gateway with one axis is that axis's own silence.
   */
  private silentGateways(
    axes: readonly Axis[],
    open: Map<string, OpenAlert>,
    at: Date,
  ): { down: Map<number, DownGateway>; inDoubt: Set<number> } {
    const down = new Map<number, DownGateway>();
    const inDoubt = new Set<number>();
    const { threshold } = this.rules.settingsOf('no-signal');
    const byId = new Map(axes.map((axis) => [axis.id, axis]));
    for (const { id, name, silence, axisIds } of this.gateways.all(at)) {
      if (silence === null || axisIds.length < 2) continue;
      if (silence < threshold) {
        if (silence > GATEWAY_IN_DOUBT) for (const axisId of axisIds) inDoubt.add(axisId);
        continue;
      }
      const alertOf = (axisId: number): OpenAlert | undefined => open.get(key(axisId, 'no-signal'));
      const able = axisIds
        .filter((axisId) => byId.has(axisId) && !byId.get(axisId)!.inMaintenance)
        .sort((a, b) => a - b);
      const leadId =
        able.find((axisId) => alertOf(axisId)?.gatewayId === id && alertOf(axisId)!.state !== 'suppressed') ??
        able.find((axisId) => !alertOf(axisId)) ??
        able.find((axisId) => ['unacknowledged', 'suppressed'].includes(alertOf(axisId)!.state)) ??
        able[0] ??
        null;
      for (const axisId of axisIds) down.set(axisId, { id, name, silence, leadId, axes: axisIds.length });
    }
    return { down, inDoubt };
  }

  private shown(rule: RuleName, axis: Axis, levels: AxisLevels, gateway: DownGateway | null): Shown {
    const settings = this.rules.settingsOf(rule);
    const { threshold } = thresholdOn(rule, settings, levels);
    const value = RULE[rule].measure(levels) ?? threshold;
    return {
      priority: settings.priority,
      value,
      threshold,
      message: gateway
        ? `Gateway ${gateway.name} has sent nothing for ${gateway.silence.toFixed(0)} s: none of its ${gateway.axes} axes is being watched.`
        : RULE[rule].message(value, threshold, levels),
      action: gateway
        ? `Look at the gateway and its network first; this one alert stands for all its axes.`
        : actionOf(rule, settings, levels),
      consequence: settings.consequence,
      respondWithin: settings.respondWithin,
      gatewayId: gateway?.id ?? null,
    };
  }

  /** Read without building entities: in a storm there are thousands, at every beat. */
  private async open(): Promise<OpenAlert[]> {
    const rows: (Omit<OpenAlert, 'over' | 'shelvedUntil'> & {
      returnedAt: string | null;
      shelvedUntil: string | null;
    })[] = await this.dataSource.query(
      `SELECT "id", "axisId", "rule", "state", "returnedAt", "shelvedUntil", "gatewayId"
       FROM "alert" WHERE "state" <> 'normal'`,
    );
    return rows.map(({ returnedAt, shelvedUntil, ...row }) => ({
      ...row,
      over: returnedAt !== null,
      shelvedUntil: stored(shelvedUntil),
    }));
  }

  private async writeTimers(manager: EntityManager): Promise<void> {
    const rows = [...this.unwritten].map((name) => {
      const gap = name.indexOf(' ');
      return { axisId: Number(name.slice(0, gap)), rule: name.slice(gap + 1), ...this.timers.get(name)! };
    });
    for (const { axisId, rule } of rows) await manager.delete(AlertTimer, { axisId, rule });
    await insertAll(manager, AlertTimer, rows);
  }
}

function noteOf(step: AlertStep, why: string | null, forgotten: boolean): string | null {
  if (step === 'clear' && forgotten) return 'Its level could not be measured any more for too long';
  if (step === 'suppress') return why;
  if (step === 'unsuppress') return 'What suppressed it is over';
  if (step === 'unshelve') return 'The shelf ended';
  return null;
}
