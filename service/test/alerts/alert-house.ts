import { EventEmitter2 } from '@nestjs/event-emitter';
import { rmSync } from 'node:fs';
import { join } from 'node:path';
import { DataSource } from 'typeorm';
import type { AlertNoticesService } from '../../src/alerts/alert-notices.service.js';
import { AlertRulesService } from '../../src/alerts/alert-rules.service.js';
import { AlertSteps } from '../../src/alerts/alert-steps.service.js';
import { AlertWatch } from '../../src/alerts/alert-watch.service.js';
import { Alert, AlertEvent } from '../../src/alerts/alert.entity.js';
import { AlertsService } from '../../src/alerts/alerts.service.js';
import type { AxisLevelsService } from '../../src/alerts/axis-levels.service.js';
import { EscalationService } from '../../src/alerts/escalation.service.js';
import { GatewaySilence } from '../../src/alerts/gateway-silence.service.js';
import type { AxisLevels } from '../../src/alerts/rules.js';
import { AuditEntry } from '../../src/audit/audit-entry.entity.js';
import { AuditService } from '../../src/audit/audit.service.js';
import type { SignedInUser } from '../../src/auth/signed-in-user.js';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { Transactions } from '../../src/database/transactions.js';
import { Axis } from '../../src/fleet/axis.entity.js';
import { Gateway } from '../../src/fleet/gateway.entity.js';
import { Machine } from '../../src/fleet/machine.entity.js';
import { Site } from '../../src/fleet/site.entity.js';
import { UserRole } from '../../src/people/user-role.entity.js';
import { User } from '../../src/people/user.entity.js';
import type { OnCall, RotaService } from '../../src/rota/rota.service.js';
import type { AxesAtHand } from '../../src/telemetry/axes-at-hand.js';
import type { IntakeService } from '../../src/telemetry/intake.service.js';
import { temporaryFolder } from '../support/start-service.js';

/** 12:00 in London. */
const START = Date.parse('2026-07-01T11:00:00Z');

const CALM: AxisLevels = {
  saturatedPct: 0,
  peakFollowingError: 0,
  gainDriftPct: 0,
  poleDriftPct: 0,
  frictionRise: 0,
  outputActivity: 0,
  dominantHz: null,
  silence: 0,
  trialWorse: 0,
  tolerances: { followingError: 1, saturatedPct: 5 },
  cause: null,
  adviceInspect: false,
};

/** The alerts of one site over a real database, with a clock, levels, a rota and gateways under a test's hands. */
export class AlertHouse {
  now = START;
  readonly levels = new Map<number, Partial<AxisLevels>>();
  onCall: OnCall | null = null;
  readonly told: { alertId: number; name: string; key: string }[] = [];
  axes: Axis[] = [];
  gatewayIds: number[] = [];
  /** When each gateway was last heard of, ms. */
  readonly heard = new Map<number, number>();
  readonly user: SignedInUser;
  watch: AlertWatch;
  gateways: GatewaySilence;
  readonly alerts: AlertsService;
  readonly escalation: EscalationService;
  readonly audit: AuditService;
  private readonly transactions: Transactions;
  private readonly rules: AlertRulesService;
  private readonly steps: AlertSteps;

  private constructor(
    readonly dataSource: DataSource,
    readonly siteId: number,
    private readonly folder: string,
  ) {
    const emitter = new EventEmitter2();
    this.user = {
      id: 1,
      name: 'Ida Marrow',
      email: 'ida@tarnwick.example',
      owner: false,
      roles: [{ siteId, role: 'engineer' }],
    };
    this.transactions = new Transactions(dataSource);
    this.audit = new AuditService(dataSource.getRepository(AuditEntry), this.transactions);
    this.rules = new AlertRulesService(dataSource, this.transactions, this.audit);
    this.steps = new AlertSteps(this.audit, emitter);
    this.alerts = new AlertsService(dataSource, this.transactions, this.rules, this.steps, emitter);
    this.escalation = new EscalationService(
      dataSource,
      this.transactions,
      { onCall: () => Promise.resolve(this.onCall) } as unknown as RotaService,
      {
        tell: (_: unknown, alert: Alert, { name }: { name: string }, key: string) => {
          this.told.push({ alertId: alert.id, name, key: `${alert.standsSince?.getTime()} ${key}` });
          return Promise.resolve('mail');
        },
      } as unknown as AlertNoticesService,
    );
  }

  static async open({ axes = 1, gateways = 0 } = {}): Promise<AlertHouse> {
    const folder = temporaryFolder();
    const dataSource = await new DataSource(dataSourceOptions(join(folder, 'alerts.sqlite'))).initialize();
    const { manager } = dataSource;
    const { id: siteId } = await manager.save(Site, { name: 'Tile Hall', timeZone: 'Europe/London' });
    const { id: machineId } = await manager.save(Machine, { siteId, name: 'Press 1' });
    const house = new AlertHouse(dataSource, siteId, folder);
    for (const [name, role] of [
      ['Bea Lorne', 'technician'],
      ['Cass Vane', 'administrator'],
    ] as const) {
      const email = `${name.slice(0, 3).toLowerCase()}@tarnwick.example`;
      const { id } = await manager.save(User, { name, email, passwordHash: '-', lastSignInAt: null });
      await manager.insert(UserRole, { userId: id, siteId, role });
    }
    house.axes = await manager.save(
      Axis,
      Array.from({ length: axes }, (_, i) => ({
        siteId,
        machineId,
        tag: `PR-${i + 1}`,
        name: `Slide ${i + 1}`,
        actuator: 'electric' as const,
        resolution: 0.01,
        sampleTime: 0.002,
        travel: { min: 0, max: 100 },
        move: { distance: 50, duration: 1 },
        tolerances: { followingError: 1, gainPct: 10, polePct: 10, saturatedPct: 5 },
        structure: 'PI-D' as const,
        pattern: { kind: 'triple' as const, lambda: 20 },
        feedForward: true,
        baseline: null,
      })),
      { chunk: 200 },
    );
    for (let k = 0; k < gateways; k++) {
      const gateway = { siteId, name: `gateway ${k + 1}`, tokenHash: `${k}`, epoch: null, lastSeenAt: null };
      house.gatewayIds.push((await manager.save(Gateway, gateway)).id);
    }
    await house.start();
    return house;
  }

  /** As after a start of the service over the same database. */
  async start(): Promise<void> {
    const site = await this.dataSource.getRepository(Site).findOneByOrFail({ id: this.siteId });
    for (const axis of this.axes) axis.site = site;
    this.gateways = new GatewaySilence(this.dataSource, this.transactions, {
      progressOf: (id: number) => ({ lastSeenAt: this.heard.get(id) ?? null }),
    } as unknown as IntakeService);
    this.watch = new AlertWatch(
      this.dataSource,
      this.transactions,
      this.rules,
      { of: (axis: Axis) => ({ ...CALM, ...this.levels.get(axis.id) }) } as unknown as AxisLevelsService,
      this.gateways,
      { all: () => Promise.resolve(this.axes) } as unknown as AxesAtHand,
      this.steps,
    );
    await this.gateways.onApplicationBootstrap();
    await this.watch.onApplicationBootstrap();
  }

  /** Lets time pass, looking once a second, or less often over long times. */
  async pass(seconds: number, every = 1): Promise<void> {
    for (let t = 0; t < seconds; t += every) {
      this.now += every * 1000;
      await this.watch.lookAtAll({ at: new Date(this.now) });
      await this.escalation.tellDue(new Date(this.now));
    }
  }

  person(name: string): OnCall {
    return { userId: 1, name, email: 'bea@tarnwick.example', until: new Date(this.now + 3_600_000) };
  }

  all(): Promise<Alert[]> {
    return this.dataSource.getRepository(Alert).find({ order: { id: 'ASC' } });
  }

  async actions(alertId: number): Promise<string[]> {
    const events = await this.dataSource
      .getRepository(AlertEvent)
      .find({ where: { alertId }, order: { id: 'ASC' } });
    return events.map(({ action, note }) => (action === 'told' ? `told ${note}` : action));
  }

  async close(): Promise<void> {
    await this.dataSource.destroy();
    rmSync(this.folder, { recursive: true, force: true });
  }
}
