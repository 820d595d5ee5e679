import { ConflictException, ForbiddenException, Injectable, NotFoundException } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectRepository } from '@nestjs/typeorm';
import { In, Repository } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import type { Role } from '../auth/policy.js';
import { SessionsService } from '../auth/sessions.service.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { InvitationService, requireOwnSites } from './invitation.service.js';
import { UserRole } from './user-role.entity.js';
import { User } from './user.entity.js';

export interface PersonView {
  id: number;
  name: string;
  email: string;
  /** On the sites that the reader administers. */
  roles: { siteId: number; siteName: string; role: Role }[];
  disabled: boolean;
  lastSignInAt: Date | null;
  /** An invitation to a further site is open. */
  invited: boolean;
}

/** The people of the sites that an administrator looks after. */
@Injectable()
export class PeopleService {
  constructor(
    @InjectRepository(User) private readonly users: Repository<User>,
    private readonly transactions: Transactions,
    private readonly invitations: InvitationService,
    private readonly sessions: SessionsService,
    private readonly audit: AuditService,
    private readonly emitter: EventEmitter2,
  ) {}

  async list(by: SignedInUser): Promise<PersonView[]> {
    const administered = sitesOf(by, 'people.manage');
    if (administered.length === 0) throw new ForbiddenException('People are for administrators');
    const people = await this.users
      .createQueryBuilder('user')
      .innerJoinAndSelect('user.roles', 'role', 'role.siteId IN (:...administered)', { administered })
      .innerJoinAndSelect('role.site', 'site')
      .orderBy('user.name')
      .addOrderBy('site.name')
      .getMany();
    const open = new Set((await this.invitations.open(by)).map(({ email }) => email));
    return people.map((user) => ({
      id: user.id,
      name: user.name,
      email: user.email,
      roles: user.roles.map(({ siteId, role, site }) => ({ siteId, siteName: site.name, role })),
      disabled: user.disabled,
      lastSignInAt: user.lastSignInAt,
      invited: open.has(user.email),
    }));
  }

  /**
   * Sets a person's roles on the sites that `by` administers (roles elsewhere stay), and whether they are disabled.
   *
   * @throws NotFoundException when they have no role on a site that `by` administers
   * @throws ForbiddenException for a role on another site, or to disable somebody who also works on others
   * @throws ConflictException when a site would be left without an administrator, or `by` would disable themselves
   */
  async change(
    by: SignedInUser,
    id: number,
    change: { roles?: { siteId: number; role: Role }[]; disabled?: boolean },
  ): Promise<PersonView> {
    requireOwnSites(by, change.roles ?? []);
    const administered = sitesOf(by, 'people.manage');
    const changed = await this.transactions.run(async (manager) => {
      const user = await manager.findOne(User, { where: { id }, relations: { roles: true } });
      const present = user?.roles.filter(({ siteId }) => administered.includes(siteId)) ?? [];
      if (!user || present.length === 0)
        throw new NotFoundException(`There is no person ${id} on your sites`);
      if (change.disabled !== undefined && change.disabled !== user.disabled) {
        if (id === by.id) throw new ConflictException('You cannot disable yourself');
        if (user.roles.length > present.length)
          throw new ForbiddenException(
            `${user.name} also works on other sites; take away the roles on yours instead`,
          );
        await manager.update(User, id, { disabled: change.disabled });
        if (change.disabled) await this.sessions.endAllOf(manager, id);
      }
      if (change.roles) {
        await manager.delete(UserRole, { userId: id, siteId: In(administered) });
        for (const { siteId, role } of change.roles)
          await manager.save(UserRole, { userId: id, siteId, role });
      }
      for (const siteId of administered) {
        const before = present.find((entry) => entry.siteId === siteId)?.role ?? null;
        const after = change.roles
          ? (change.roles.find((entry) => entry.siteId === siteId)?.role ?? null)
          : before;
        if (before === 'administrator' && (after !== before || change.disabled)) {
          const left = await manager.countBy(UserRole, {
            siteId,
            role: 'administrator',
            user: { disabled: false },
          });
          if (left === 0)
            throw new ConflictException(`Site ${siteId} would be left without an administrator`);
        }
        const disabled = change.disabled ?? user.disabled;
        if (before !== after || (before !== null && disabled !== user.disabled))
          await this.audit.record(manager, {
            user: by,
            action: 'person.changed',
            subject: { type: 'person', id },
            siteId,
            before: { role: before, disabled: user.disabled },
            after: { role: after, disabled },
          });
      }
      return { ...user, disabled: change.disabled ?? user.disabled };
    });
    tell(this.emitter, 'person.changed', { userId: id });
    const listed = (await this.list(by)).find((person) => person.id === id);
    const { name, email, disabled, lastSignInAt } = changed;
    return listed ?? { id, name, email, roles: [], disabled, lastSignInAt, invited: false };
  }
}
