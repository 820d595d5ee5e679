import { BadRequestException, ForbiddenException, Injectable, NotFoundException } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, MoreThan, type DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { mayDo } from '../auth/policy.js';
import { may, requireRole, sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { Site } from '../fleet/site.entity.js';
import { UserRole } from '../people/user-role.entity.js';
import { User } from '../people/user.entity.js';
import { HandoverNote } from './handover-note.entity.js';
import { RotaLayer } from './rota-layer.entity.js';
import { RotaOverride } from './rota-override.entity.js';
import { gapsBetween, shiftsBetween, type Gap, type Rotation, type Shift } from './shifts.js';

/** ms */
const DAY = 24 * 3_600_000;
/** How far ahead the rota is laid out. */
const AHEAD = 14 * DAY;
/** Longest time that somebody stands in. */
const LONGEST_OVERRIDE = 92 * DAY;

export interface OnCall {
  userId: number;
  name: string;
  email: string;
  until: Date;
}

export interface RotaView {
  site: Site;
  layer: RotaLayer | null;
  overrides: RotaOverride[];
  shifts: Shift[];
  gaps: Gap[];
  onCall: OnCall | null;
  /** By id, of everybody that the rota names. */
  people: Map<number, User>;
}

/** What a site's rota is made of, with those who can be on call: who may acknowledge there and can sign in. */
interface SiteRota {
  site: Site;
  layer: RotaLayer | null;
  overrides: RotaOverride[];
  available: Map<number, User>;
}

@Injectable()
export class RotaService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly emitter: EventEmitter2,
  ) {}

  /** Who is on call on a site at an instant and until when, or null in a gap. */
  async onCall(siteId: number, at: Date): Promise<OnCall | null> {
    return onCallOf(await this.load(siteId, at), at);
  }

  /** Who is on call now on each site of a person. */
  async onCallEverywhere(user: SignedInUser, at: Date): Promise<{ site: Site; onCall: OnCall | null }[]> {
    const sites = await this.dataSource
      .getRepository(Site)
      .find({ where: { id: In(sitesOf(user)) }, order: { name: 'ASC' } });
    const items = [];
    for (const site of sites) items.push({ site, onCall: await this.onCall(site.id, at) });
    return items;
  }

  /** A site's rota from now for two weeks. */
  async view(user: SignedInUser, siteId: number, now: Date): Promise<RotaView> {
    requireRole(user, siteId, 'see', `site ${siteId}`);
    const rota = await this.load(siteId, now);
    const span = { from: now, to: new Date(now.getTime() + AHEAD) };
    const shifts = shiftsOf(rota, span);
    const named = [
      ...(rota.layer?.memberIds ?? []),
      ...rota.overrides.map(({ userId }) => userId),
      ...shifts.map(({ userId }) => userId),
    ];
    const people = await this.dataSource.getRepository(User).findBy({ id: In(named) });
    return {
      ...rota,
      shifts,
      gaps: gapsBetween(shifts, span),
      onCall: onCallOf(rota, now),
      people: new Map(people.map((person) => [person.id, person])),
    };
  }

  /** Sets a site's rotation; overrides stay. */
  async setLayer(user: SignedInUser, siteId: number, rotation: Rotation): Promise<void> {
    requireRole(user, siteId, 'rota.change', `site ${siteId}`);
    const { available } = await this.load(siteId, new Date());
    const errors = rotation.memberIds
      .filter((id) => !available.has(id))
      .map((id) => ({ path: 'members', message: `Person ${id} cannot acknowledge alerts on this site` }));
    if (errors.length > 0) throw new BadRequestException({ errors });
    await this.transactions.run(async (manager) => {
      const before = await manager.findOneBy(RotaLayer, { siteId });
      await manager.save(RotaLayer, { ...(before ? { id: before.id } : {}), siteId, ...rotation });
      await this.audit.record(manager, {
        user,
        action: 'rota.changed',
        subject: { type: 'rota', id: siteId },
        siteId,
        before: before && rotationOf(before),
        after: rotation,
      });
    });
    tell(this.emitter, 'rota.changed', { siteId });
  }

  /**
   * Lets somebody stand in. Those on call may do so for their own part: they take over themselves, or hand on a time in
   * which nobody but they are on call.
   */
  async addOverride(
    user: SignedInUser,
    siteId: number,
    { userId, from, to, reason }: { userId: number; from: Date; to: Date; reason: string },
  ): Promise<RotaOverride> {
    requireRole(user, siteId, 'rota.override', `site ${siteId}`);
    const now = new Date();
    const rota = await this.load(siteId, now);
    const errors = [
      ...(from < to ? [] : [{ path: 'to', message: 'It must end after it begins' }]),
      ...(to > now ? [] : [{ path: 'to', message: 'It must end in the future' }]),
      ...(to.getTime() - from.getTime() <= LONGEST_OVERRIDE
        ? []
        : [{ path: 'to', message: 'It may last 92 days at most; change the rotation instead' }]),
      ...(rota.available.has(userId)
        ? []
        : [{ path: 'userId', message: `Person ${userId} cannot acknowledge alerts on this site` }]),
    ];
    if (errors.length > 0) throw new BadRequestException({ errors });
    if (!may(user, siteId, 'rota.change') && userId !== user.id) {
      const span = { from: from > now ? from : now, to };
      const shifts = shiftsOf(rota, span);
      if (gapsBetween(shifts, span).length > 0 || shifts.some((shift) => shift.userId !== user.id))
        throw new ForbiddenException(
          'You may take over yourself or hand on your own time; ask an administrator',
        );
    }
    const override = await this.transactions.run(async (manager) => {
      const saved = await manager.save(
        manager.create(RotaOverride, { siteId, userId, from, to, reason, createdById: user.id }),
      );
      await this.audit.record(manager, {
        user,
        action: 'rota.override-added',
        subject: { type: 'rota', id: siteId },
        siteId,
        note: reason,
        after: { id: saved.id, userId, from, to },
      });
      return saved;
    });
    tell(this.emitter, 'rota.changed', { siteId });
    return override;
  }

  /** Takes an override away: who made it, who stands in by it, or an administrator. */
  async removeOverride(user: SignedInUser, siteId: number, id: number): Promise<void> {
    requireRole(user, siteId, 'rota.override', `site ${siteId}`);
    await this.transactions.run(async (manager) => {
      const override = await manager.findOneBy(RotaOverride, { id, siteId });
      if (!override) throw new NotFoundException(`There is no override ${id} on this site`);
      if (![override.userId, override.createdById].includes(user.id) && !may(user, siteId, 'rota.change'))
        throw new ForbiddenException('This override is not yours; ask an administrator');
      await manager.delete(RotaOverride, id);
      await this.audit.record(manager, {
        user,
        action: 'rota.override-removed',
        subject: { type: 'rota', id: siteId },
        siteId,
        note: override.reason,
        before: { id, userId: override.userId, from: override.from, to: override.to },
      });
    });
    tell(this.emitter, 'rota.changed', { siteId });
  }

  /** Hand-over notes, newest first. */
  async notes(
    user: SignedInUser,
    siteId: number,
    { limit, beforeId }: { limit: number; beforeId?: number },
  ): Promise<{ items: HandoverNote[]; nextCursor: string | null }> {
    requireRole(user, siteId, 'see', `site ${siteId}`);
    const query = this.dataSource
      .getRepository(HandoverNote)
      .createQueryBuilder('note')
      .innerJoinAndSelect('note.user', 'user')
      .where('note.siteId = :siteId', { siteId })
      .orderBy('note.id', 'DESC')
      .limit(limit + 1);
    if (beforeId) query.andWhere('note.id < :beforeId', { beforeId });
    const found = await query.getMany();
    const items = found.slice(0, limit);
    return { items, nextCursor: found.length > limit ? String(items.at(-1)?.id) : null };
  }

  async addNote(user: SignedInUser, siteId: number, text: string): Promise<HandoverNote> {
    requireRole(user, siteId, 'note.write', `site ${siteId}`);
    const note = await this.transactions.run((manager) =>
      manager.save(manager.create(HandoverNote, { siteId, at: new Date(), userId: user.id, text })),
    );
    tell(this.emitter, 'rota.changed', { siteId });
    return note;
  }

  private async load(siteId: number, from: Date): Promise<SiteRota> {
    const { manager } = this.dataSource;
    const site = await manager.findOneBy(Site, { id: siteId });
    if (!site) throw new NotFoundException(`There is no site ${siteId}`);
    const roles = await manager.find(UserRole, {
      where: { siteId, user: { disabled: false } },
      relations: { user: true },
    });
    return {
      site,
      layer: await manager.findOneBy(RotaLayer, { siteId }),
      overrides: await manager.find(RotaOverride, {
        where: { siteId, to: MoreThan(from) },
        order: { id: 'ASC' },
      }),
      available: new Map(
        roles.filter(({ role }) => mayDo(role, 'alert.acknowledge')).map(({ user }) => [user.id, user]),
      ),
    };
  }
}

const rotationOf = ({ memberIds, handOverTime, rotationDays, startDate }: RotaLayer): Rotation => ({
  memberIds,
  handOverTime,
  rotationDays,
  startDate,
});

const shiftsOf = ({ layer, overrides, site, available }: SiteRota, span: Gap): Shift[] =>
  shiftsBetween(layer, overrides, site.timeZone, span, (id) => available.has(id));

function onCallOf(rota: SiteRota, at: Date): OnCall | null {
  const [shift] = shiftsOf(rota, { from: at, to: new Date(at.getTime() + 1) });
  const person = shift && rota.available.get(shift.userId);
  return person ? { userId: person.id, name: person.name, email: person.email, until: shift.to } : null;
}
