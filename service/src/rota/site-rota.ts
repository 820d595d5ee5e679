import { NotFoundException } from '@nestjs/common';
import { MoreThan, type EntityManager } from 'typeorm';
import { mayDo } from '../auth/policy.js';
import { Site } from '../fleet/site.entity.js';
import { UserRole } from '../people/user-role.entity.js';
import type { User } from '../people/user.entity.js';
import { RotaLayer } from './rota-layer.entity.js';
import { RotaOverride } from './rota-override.entity.js';
import { shiftsBetween, type Gap, type Shift } from './shifts.js';

/** What a site's rota is made of, with those who can be on call: who may acknowledge there and can sign in. */
export interface SiteRota {
  site: Site;
  /** The lowest first. */
  layers: RotaLayer[];
  /** In the order in which they were made. */
  overrides: RotaOverride[];
  available: Map<number, User>;
}

/** Reads a site's rota with the overrides that end after `from`. */
export async function loadSiteRota(manager: EntityManager, siteId: number, from: Date): Promise<SiteRota> {
  const site = await manager.findOneBy(Site, { id: siteId });
  if (!site) throw new NotFoundException(`There is no site ${siteId}`);
  const roles = await manager.find(UserRole, {
    where: { siteId, user: { disabled: false } },
    relations: { user: true },
  });
  return {
    site,
    layers: await manager.find(RotaLayer, { where: { siteId }, order: { position: 'ASC' } }),
    overrides: await manager.find(RotaOverride, {
      where: { siteId, to: MoreThan(from) },
      order: { id: 'ASC' },
    }),
    available: new Map(
      roles.filter(({ role }) => mayDo(role, 'alert.acknowledge')).map(({ user }) => [user.id, user]),
    ),
  };
}

/** A site's shifts that touch a stretch of time. */
export const shiftsOf = ({ layers, overrides, site, available }: SiteRota, span: Gap): Shift[] =>
  shiftsBetween(layers, overrides, site.timeZone, span, (id) => available.has(id));

/** Whether one person is on call all through a stretch of time. */
export function onCallThroughout(rota: SiteRota, userId: number, { from, to }: Gap): boolean {
  let covered = from;
  for (const shift of shiftsOf(rota, { from, to })) {
    if (shift.userId !== userId || shift.from > covered) return false;
    covered = shift.to;
  }
  return covered >= to;
}
