import { ConflictException, Injectable } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { In, MoreThan, Not, type EntityManager, type ObjectLiteral, type EntityTarget } from 'typeorm';
import { AuditService, type AuditRecord } from '../audit/audit.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { tell } from '../events.js';
import { Alert, AlertEvent } from './alert.entity.js';
import { nextState, type AlertStep } from './life-cycle.js';
import type { RuleName } from './rules.js';

/** Rows in one statement: SQLite takes at most 32,766 parameters. */
const ROWS = 400;

/** A step that an alert is to take. */
export interface StepOrder {
  alertId: number;
  step: AlertStep;
  note?: string | null;
  /** End of a shelf. */
  until?: Date;
  /** With `raise`: what is measured now and what is said about it. */
  shown?: Shown;
}

/** What a raised alert says. */
export type Shown = Pick<
  Alert,
  'priority' | 'value' | 'threshold' | 'message' | 'action' | 'consequence' | 'respondWithin' | 'gatewayId'
>;

/** A new alert of an axis and rule that has none open. */
export interface NewAlert extends Shown {
  siteId: number;
  axisId: number;
  rule: RuleName;
  tag: string;
}

export const PAST: Record<AlertStep, string> = {
  raise: 'raised',
  clear: 'returned to normal',
  acknowledge: 'acknowledged',
  shelve: 'shelved',
  unshelve: 'taken off the shelf',
  suppress: 'suppressed',
  unsuppress: 'no longer suppressed',
  'take-out-of-service': 'taken out of service',
  'return-to-service': 'returned to service',
};

/** Takes steps of the life cycle and writes them down: many at once in few statements, so that a storm passes. */
@Injectable()
export class AlertSteps {
  constructor(
    private readonly audit: AuditService,
    private readonly emitter: EventEmitter2,
  ) {}

  /**
   * Raises new alerts and takes steps of open ones, in their order. What the state of an alert does not allow is left
   * out when the service itself asked for it, and refused when a person did.
   *
   * @param mailAfter s until somebody is told about an alert that comes to stand, by rule
   * @returns the alerts that changed, for `announce` after the commit
   * @throws ConflictException when a person asked for what the state does not allow
   */
  async take(
    manager: EntityManager,
    { raise = [], steps = [] }: { raise?: readonly NewAlert[]; steps?: readonly StepOrder[] },
    user: SignedInUser | null,
    at: Date,
    mailAfter: (rule: RuleName) => number,
  ): Promise<{ changed: Alert[]; raised: Alert[] }> {
    const open = new Map(
      (
        await inParts(
          steps.map(({ alertId }) => alertId),
          (ids) => manager.findBy(Alert, { id: In(ids) }),
        )
      ).map((alert) => [alert.id, alert]),
    );
    const by = user?.name ?? 'service';
    const events: Omit<AlertEvent, 'id' | 'alert'>[] = [];
    const records: AuditRecord[] = [];
    const changed = new Map<number, Alert>();
    const raised: Alert[] = [];
    for (const order of steps) {
      const alert = open.get(order.alertId);
      if (!alert) continue;
      const before = alert.state;
      const next = nextState(before, order.step, alert.returnedAt === null);
      if (next === null && user)
        throw new ConflictException(
          `Alert ${alert.id} is ${before.replaceAll('-', ' ')}; it cannot be ${PAST[order.step]} now`,
        );
      if (next === null) continue;
      change(alert, order, next, by, at, mailAfter(alert.rule));
      changed.set(alert.id, alert);
      if (order.step === 'raise' && next === 'unacknowledged') raised.push(alert);
      const note = order.note ?? (order.step === 'raise' ? alert.message : null);
      events.push({ alertId: alert.id, at, by, action: PAST[order.step], note });
      records.push({
        user,
        action: `alert.${PAST[order.step].replaceAll(' ', '-')}`,
        subject: { type: 'alert', id: alert.id },
        siteId: alert.siteId,
        note,
        before: { state: before },
        after: { state: next },
      });
    }
    await this.update(manager, [...changed.values()]);
    const born = await this.insert(manager, raise, at, mailAfter);
    for (const [alert, tag] of born) {
      changed.set(alert.id, alert);
      raised.push(alert);
      events.push({ alertId: alert.id, at, by, action: PAST.raise, note: alert.message });
      records.push({
        user,
        action: 'alert.raised',
        subject: { type: 'alert', id: alert.id },
        siteId: alert.siteId,
        note: `${tag}: ${alert.message}`,
      });
    }
    await insertAll(manager, AlertEvent, events);
    await this.audit.recordAll(manager, records);
    return { changed: [...changed.values()], raised };
  }

  /** Tells the other modules, after the commit. */
  announce({ changed, raised }: { changed: readonly Alert[]; raised: readonly Alert[] }): void {
    for (const { id, axisId, siteId } of raised)
      tell(this.emitter, 'alert.raised', { alertId: id, axisId, siteId });
    for (const { id, axisId, siteId } of changed)
      tell(this.emitter, 'alert.changed', { alertId: id, axisId, siteId });
  }

  private async update(manager: EntityManager, alerts: Alert[]): Promise<void> {
    for (const alert of alerts) {
      const { id, axis: _axis, events: _events, ...columns } = alert;
      await manager.update(Alert, id, columns);
    }
  }

  private async insert(
    manager: EntityManager,
    raise: readonly NewAlert[],
    at: Date,
    mailAfter: (rule: RuleName) => number,
  ): Promise<[Alert, string][]> {
    if (raise.length === 0) return [];
    const { last } = (await manager
      .createQueryBuilder(Alert, 'alert')
      .select('COALESCE(MAX(alert.id), 0)', 'last')
      .getRawOne<{ last: number }>())!;
    await insertAll(
      manager,
      Alert,
      raise.map(({ tag: _tag, ...alert }) => ({
        ...alert,
        state: 'unacknowledged' as const,
        raisedAt: at,
        standsSince: at,
        nextStepAt: new Date(at.getTime() + mailAfter(alert.rule) * 1000),
      })),
    );
    const tags = new Map(raise.map(({ axisId, tag }) => [axisId, tag]));
    const born = await manager.findBy(Alert, { id: MoreThan(last), state: Not('normal') });
    return born.map((alert) => [alert, tags.get(alert.axisId)!]);
  }
}

/** Carries a step out on the alert itself. */
function change(
  alert: Alert,
  { step, note = null, until, shown }: StepOrder,
  next: Alert['state'],
  by: string,
  at: Date,
  mailAfter: number,
): void {
  const cameBack = alert.state !== 'unacknowledged' && next === 'unacknowledged';
  alert.state = next;
  if (step === 'raise') Object.assign(alert, { returnedAt: null, ...shown });
  if (step === 'clear') alert.returnedAt = at;
  if (step === 'acknowledge') Object.assign(alert, { acknowledgedAt: at, acknowledgedBy: by });
  if (next === 'shelved' && step === 'shelve')
    Object.assign(alert, { shelvedUntil: until, shelvedBy: by, shelveReason: note });
  if (next !== 'shelved') Object.assign(alert, { shelvedUntil: null, shelvedBy: null, shelveReason: null });
  if (step === 'suppress') alert.suppressedBecause = note;
  if (next !== 'suppressed') alert.suppressedBecause = null;
  if (step === 'take-out-of-service') Object.assign(alert, { outOfServiceBy: by, outOfServiceReason: note });
  if (next !== 'out-of-service') Object.assign(alert, { outOfServiceBy: null, outOfServiceReason: null });
  if (next !== 'unacknowledged') alert.nextStepAt = null;
  if (cameBack)
    Object.assign(alert, {
      ...(step === 'raise' && { raisedAt: at }),
      acknowledgedAt: null,
      acknowledgedBy: null,
      standsSince: at,
      stepsTaken: 0,
      fallbackToldAt: null,
      nextStepAt: new Date(at.getTime() + mailAfter * 1000),
    });
  if (next === 'normal') alert.returnedAt ??= at;
}

/** Reads by number, a few hundred at once. */
export async function inParts<T>(
  ids: readonly number[],
  read: (part: number[]) => Promise<T[]>,
): Promise<T[]> {
  const found: T[] = [];
  const once = [...new Set(ids)];
  for (let i = 0; i < once.length; i += ROWS) found.push(...(await read(once.slice(i, i + ROWS))));
  return found;
}

/** Inserts rows, a few hundred in one statement. */
export async function insertAll<Entity extends ObjectLiteral>(
  manager: EntityManager,
  target: EntityTarget<Entity>,
  rows: readonly object[],
): Promise<void> {
  for (let i = 0; i < rows.length; i += ROWS)
    await manager
      .createQueryBuilder()
      .insert()
      .into(target)
      .values(rows.slice(i, i + ROWS) as never)
      .updateEntity(false)
      .execute();
}
