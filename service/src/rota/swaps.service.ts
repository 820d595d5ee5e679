import {
  BadRequestException,
  ConflictException,
  ForbiddenException,
  Injectable,
  NotFoundException,
} from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { MoreThan, type DataSource, type EntityManager } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { may, requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { MailOutboxService } from '../notifications/mail-outbox.service.js';
import { composeMail } from '../notifications/mail-text.js';
import type { FieldProblem } from '../problem.filter.js';
import type { Settings } from '../settings.js';
import { OverridesService } from './overrides.service.js';
import { RotaSwap, type SwapState } from './rota-swap.entity.js';
import type { Gap } from './shifts.js';
import { loadSiteRota, onCallThroughout, type SiteRota } from './site-rota.js';

export interface WantedSwap {
  askedOfId: number;
  /** The asking person's own time. */
  give: Gap;
  /** A time of the other one, taken in return. */
  take: Gap | null;
  reason: string;
}

export type SwapAnswer = Exclude<SwapState, 'asked'>;

/** Turns that two people exchange: one asks, the other accepts, and only then does the rota change. */
@Injectable()
export class SwapsService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly overrides: OverridesService,
    private readonly outbox: MailOutboxService,
    private readonly audit: AuditService,
    private readonly emitter: EventEmitter2,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  /** Swaps that wait for an answer and can still be accepted, the soonest first. */
  open(siteId: number, now: Date): Promise<RotaSwap[]> {
    return this.dataSource.getRepository(RotaSwap).find({
      where: { siteId, state: 'asked', from: MoreThan(now) },
      relations: { askedBy: true, askedOf: true },
      order: { from: 'ASC', id: 'ASC' },
    });
  }

  /** Asks somebody to take over a time of one's own; they are told by mail. */
  async ask(user: SignedInUser, siteId: number, wanted: WantedSwap): Promise<void> {
    requireRole(user, siteId, 'alert.acknowledge', `site ${siteId}`);
    const now = new Date();
    await this.transactions.run(async (manager) => {
      const rota = await loadSiteRota(manager, siteId, now);
      const errors = swapProblems(rota, user.id, wanted, now);
      if (errors.length > 0) throw new BadRequestException({ errors });
      const { id } = await manager.save(
        manager.create(RotaSwap, {
          siteId,
          askedById: user.id,
          askedOfId: wanted.askedOfId,
          from: wanted.give.from,
          to: wanted.give.to,
          returnFrom: wanted.take?.from ?? null,
          returnTo: wanted.take?.to ?? null,
          reason: wanted.reason,
        }),
      );
      const swap = await found(manager, siteId, id);
      await this.audit.record(manager, {
        user,
        action: 'rota.swap-asked',
        subject: { type: 'rota', id: siteId },
        siteId,
        note: wanted.reason,
        after: { swap: id, askedOf: wanted.askedOfId, give: wanted.give, take: wanted.take },
      });
      await this.mail(manager, swap, swap.askedOf, `${user.name} asks you to swap on-call time`);
    });
    tell(this.emitter, 'rota.changed', { siteId });
  }

  /**
   * Accepts, declines or withdraws a swap. Accepted, it becomes overrides at once.
   *
   * @throws ConflictException when it was answered, has begun, or the rota has changed under it
   */
  async answer(user: SignedInUser, siteId: number, id: number, answer: SwapAnswer): Promise<void> {
    requireRole(user, siteId, 'rota.override', `site ${siteId}`);
    const now = new Date();
    await this.transactions.run(async (manager) => {
      const swap = await found(manager, siteId, id);
      const mine = answer === 'withdrawn' ? swap.askedById : swap.askedOfId;
      if (user.id !== mine && !(answer === 'withdrawn' && may(user, siteId, 'rota.change')))
        throw new ForbiddenException(
          answer === 'withdrawn' ? 'Only who asked may withdraw it' : 'Only who was asked may answer',
        );
      if (swap.state !== 'asked') throw new ConflictException(`This swap is ${swap.state} already`);
      if (answer === 'accepted') await this.carryOut(manager, user, swap, now);
      await manager.update(RotaSwap, id, { state: answer, answeredAt: now });
      await this.audit.record(manager, {
        user,
        action: `rota.swap-${answer}`,
        subject: { type: 'rota', id: siteId },
        siteId,
        note: swap.reason,
        after: { swap: id },
      });
      if (answer !== 'withdrawn')
        await this.mail(manager, swap, swap.askedBy, `${user.name} has ${answer} the swap`);
    });
    tell(this.emitter, 'rota.changed', { siteId });
  }

  private async carryOut(
    manager: EntityManager,
    user: SignedInUser,
    swap: RotaSwap,
    now: Date,
  ): Promise<void> {
    const rota = await loadSiteRota(manager, swap.siteId, now);
    const take = swap.returnFrom && swap.returnTo ? { from: swap.returnFrom, to: swap.returnTo } : null;
    const give = { from: swap.from, to: swap.to };
    const problems = swapProblems(rota, swap.askedById, { ...swap, give, take }, now);
    if (problems.length > 0)
      throw new ConflictException(
        `The rota has changed since it was asked: ${problems.map(({ message }) => message).join('; ')}`,
      );
    const reason = `Swap of ${swap.askedBy.name} and ${swap.askedOf.name}: ${swap.reason}`;
    const { siteId } = swap;
    await this.overrides.store(manager, user, siteId, { userId: swap.askedOfId, ...give, reason });
    if (take) await this.overrides.store(manager, user, siteId, { userId: swap.askedById, ...take, reason });
  }

  private async mail(
    manager: EntityManager,
    swap: RotaSwap,
    to: { name: string; email: string },
    subject: string,
  ): Promise<void> {
    const { timeZone, name } = swap.site;
    const clock = (at: Date): string =>
      at.toLocaleString('en-GB', { timeZone, dateStyle: 'medium', timeStyle: 'short' });
    const span = (from: Date, until: Date): string => `${clock(from)} to ${clock(until)}`;
    await this.outbox.enqueue(manager, {
      key: `swap ${swap.id} ${subject}`,
      to: to.email,
      siteId: swap.siteId,
      subject,
      ...composeMail({
        greeting: `Good day ${to.name},`,
        paragraphs: [
          `${name}, times of ${timeZone}.`,
          `${swap.askedOf.name} for ${swap.askedBy.name}: ${span(swap.from, swap.to)}.`,
          ...(swap.returnFrom && swap.returnTo
            ? [
                `In return ${swap.askedBy.name} for ${swap.askedOf.name}: ${span(swap.returnFrom, swap.returnTo)}.`,
              ]
            : []),
          `Reason: ${swap.reason}`,
          'The rota changes only when it is accepted.',
        ],
        link: { label: 'Open the rota', url: `${this.config.get('PUBLIC_URL', { infer: true })}/rota` },
      }),
    });
  }
}

async function found(manager: EntityManager, siteId: number, id: number): Promise<RotaSwap> {
  const swap = await manager.findOne(RotaSwap, {
    where: { id, siteId },
    relations: { askedBy: true, askedOf: true, site: true },
  });
  if (!swap) throw new NotFoundException(`There is no swap ${id} on this site`);
  return swap;
}

/** What speaks against a swap. Both must be on call by themselves all through what they give away. */
function swapProblems(
  rota: SiteRota,
  askedById: number,
  { askedOfId, give, take }: Pick<WantedSwap, 'askedOfId' | 'give' | 'take'>,
  now: Date,
): FieldProblem[] {
  const nameOf = (id: number): string => rota.available.get(id)?.name ?? `Person ${id}`;
  const ofSpan = (span: Gap, giver: number, paths: { from: string; to: string }): FieldProblem[] => {
    if (span.from >= span.to) return [{ path: paths.to, message: 'It must end after it begins' }];
    if (span.from <= now) return [{ path: paths.from, message: 'It must lie ahead' }];
    if (onCallThroughout(rota, giver, span)) return [];
    return [{ path: paths.from, message: `${nameOf(giver)} is not on call all through that time` }];
  };
  return [
    ...(askedOfId === askedById ? [{ path: 'askedOfId', message: 'It takes two people' }] : []),
    ...[askedById, askedOfId]
      .filter((id) => !rota.available.has(id))
      .map((id) => ({ path: 'askedOfId', message: `Person ${id} cannot acknowledge alerts on this site` })),
    ...ofSpan(give, askedById, { from: 'from', to: 'to' }),
    ...(take ? ofSpan(take, askedOfId, { from: 'returnFrom', to: 'returnTo' }) : []),
  ];
}
