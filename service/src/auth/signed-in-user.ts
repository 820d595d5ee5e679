import { ForbiddenException, NotFoundException } from '@nestjs/common';
import { mayDo, type Action, type Role } from './policy.js';

/** The person behind a request: read from the database at each request, so a changed role counts at once. */
export interface SignedInUser {
  id: number;
  name: string;
  email: string;
  /** May register sites without being administrator of one. */
  owner: boolean;
  roles: { siteId: number; role: Role }[];
}

/** The sites on which a person has any role, or, given an action, a role that may do it. */
export const sitesOf = (user: SignedInUser, action?: Action): number[] =>
  user.roles.filter(({ role }) => !action || mayDo(role, action)).map(({ siteId }) => siteId);

/** Whether a person may do an action on a site. */
export const may = (user: SignedInUser, siteId: number, action: Action): boolean =>
  user.roles.some((entry) => entry.siteId === siteId && mayDo(entry.role, action));

/** Whether a person may register a further site: who administers one, or the owner of the installation. */
export const mayRegisterSites = (user: SignedInUser): boolean =>
  user.owner || user.roles.some(({ role }) => mayDo(role, 'site.register'));

/**
 * Lets a person through, or refuses.
 *
 * @param what the thing's name for the refusal, such as "axis 12"
 * @throws NotFoundException when the person has no role on the site: what they may not see does not exist for them
 * @throws ForbiddenException when their role may not do the action
 */
export function requireRole(user: SignedInUser, siteId: number, action: Action | 'see', what: string): void {
  const entry = user.roles.find((role) => role.siteId === siteId);
  if (!entry) throw new NotFoundException(`There is no ${what}`);
  if (action !== 'see' && !mayDo(entry.role, action))
    throw new ForbiddenException(
      `As ${entry.role} on this site you may not do this (${action}) with ${what}`,
    );
}
