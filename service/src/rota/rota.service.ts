import { BadRequestException, Injectable } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, type DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { requireRole, sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { Site } from '../fleet/site.entity.js';
import { User } from '../people/user.entity.js';
import { RotaLayer } from './rota-layer.entity.js';
import type { RotaOverride } from './rota-override.entity.js';
import { gapsBetween, type Gap, type Layer, type Shift } from './shifts.js';
import { loadSiteRota, shiftsOf, type SiteRota } from './site-rota.js';

/** How far ahead the rota is laid out, ms. */
const AHEAD = 14 * 24 * 3_600_000;

export interface OnCall {
  userId: number;
  name: string;
  email: string;
  until: Date;
}

export interface RotaView {
  site: Site;
  layers: RotaLayer[];
  overrides: RotaOverride[];
  shifts: Shift[];
  gaps: Gap[];
  onCall: OnCall | null;
  /** By id, of everybody that the rota names. */
  people: Map<number, User>;
  /** Who can be on call on this site. */
  available: Map<number, User>;
}

/** Who is on call, and the layers that say so. */
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
    return onCallOf(await loadSiteRota(this.dataSource.manager, siteId, at), at);
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

  /** A site's rota from an instant on, for two weeks or as far as asked. */
  async view(
    user: SignedInUser,
    siteId: number,
    from: Date,
    to = new Date(from.getTime() + AHEAD),
  ): Promise<RotaView> {
    requireRole(user, siteId, 'see', `site ${siteId}`);
    const rota = await loadSiteRota(this.dataSource.manager, siteId, from);
    const span = { from, to };
    const shifts = shiftsOf(rota, span);
    const named = [
      ...rota.layers.flatMap(({ memberIds }) => memberIds),
      ...rota.overrides.map(({ userId }) => userId),
      ...shifts.map(({ userId }) => userId),
    ];
    const people = await this.dataSource.getRepository(User).findBy({ id: In(named) });
    return {
      ...rota,
      shifts,
      gaps: gapsBetween(shifts, span),
      onCall: onCallOf(rota, from),
      people: new Map(people.map((person) => [person.id, person])),
    };
  }

  /** Sets a site's layers, the lowest first, in the place of those that it had; overrides stay. */
  async setLayers(user: SignedInUser, siteId: number, layers: readonly Layer[]): Promise<void> {
    requireRole(user, siteId, 'rota.change', `site ${siteId}`);
    const { available } = await loadSiteRota(this.dataSource.manager, siteId, new Date());
    const errors = layers.flatMap((layer, i) => {
      const at = (field: string): string => `layers.${i}.${field}`;
      return [
        ...layer.memberIds
          .filter((id) => !available.has(id))
          .map((id) => ({
            path: at('members'),
            message: `Person ${id} cannot acknowledge alerts on this site`,
          })),
        ...(layer.endDate !== null && layer.endDate <= layer.startDate
          ? [{ path: at('endDate'), message: 'It must end after it starts' }]
          : []),
        ...(layers.findIndex(({ name }) => name === layer.name) < i
          ? [{ path: at('name'), message: `There are two layers named "${layer.name}"` }]
          : []),
      ];
    });
    if (errors.length > 0) throw new BadRequestException({ errors });
    await this.transactions.run(async (manager) => {
      const before = await manager.find(RotaLayer, { where: { siteId }, order: { position: 'ASC' } });
      await manager.delete(RotaLayer, { siteId });
      await manager.insert(
        RotaLayer,
        layers.map((layer, position) => ({ ...layer, siteId, position })),
      );
      await this.audit.record(manager, {
        user,
        action: 'rota.changed',
        subject: { type: 'rota', id: siteId },
        siteId,
        before: before.map(layerOf),
        after: layers.map(layerOf),
      });
    });
    tell(this.emitter, 'rota.changed', { siteId });
  }
}

const layerOf = ({
  name,
  memberIds,
  handOverTime,
  rotationDays,
  startDate,
  endDate,
  weekdays,
  hours,
}: Layer): Layer => ({
  name,
  memberIds,
  handOverTime,
  rotationDays,
  startDate,
  endDate,
  weekdays,
  hours,
});

function onCallOf(rota: SiteRota, at: Date): OnCall | null {
  const [shift] = shiftsOf(rota, { from: at, to: new Date(at.getTime() + 1) });
  const person = shift && rota.available.get(shift.userId);
  return person ? { userId: person.id, name: person.name, email: person.email, until: shift.to } : null;
}
