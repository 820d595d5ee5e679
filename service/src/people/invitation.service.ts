import {
  BadRequestException,
  ConflictException,
  ForbiddenException,
  HttpStatus,
  HttpException,
  Injectable,
  NotFoundException,
} from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectRepository } from '@nestjs/typeorm';
import { In, IsNull, MoreThan, type EntityManager, Repository } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { AuthService, normalEmail, type OpenedSession } from '../auth/auth.service.js';
import { hashOfToken, hashPassword, newToken } from '../auth/passwords.js';
import type { Role } from '../auth/policy.js';
import { SessionsService } from '../auth/sessions.service.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { Site } from '../fleet/site.entity.js';
import { composeMail } from '../notifications/mail-text.js';
import { MailOutboxService } from '../notifications/mail-outbox.service.js';
import type { Settings } from '../settings.js';
import { Invitation, type InvitationPurpose } from './invitation.entity.js';
import { UserRole } from './user-role.entity.js';
import { User } from './user.entity.js';

/** ms */
const HOUR = 3_600_000;
/** Long enough for a person on leave, short enough for a mailbox that changes hands. */
const LIFETIME: Record<InvitationPurpose, number> = { invitation: 7 * 24 * HOUR, 'password-reset': HOUR };
/** ms between two reset mails to the same person */
const RESET_PAUSE = 60_000;

interface SiteRole {
  siteId: number;
  role: Role;
}

/** What the link is for, before anybody has accepted it. */
export interface InvitationView {
  purpose: InvitationPurpose;
  name: string;
  /** null on the link for the first administrator */
  email: string | null;
  /** The address has an account: its present password is asked for, none is set. */
  existing: boolean;
  siteRoles: { siteName: string; role: Role }[];
}

/** Single-use links by mail: the way to an account, to further roles, and back in after a forgotten password. */
@Injectable()
export class InvitationService {
  constructor(
    @InjectRepository(Invitation) private readonly invitations: Repository<Invitation>,
    private readonly transactions: Transactions,
    private readonly auth: AuthService,
    private readonly sessions: SessionsService,
    private readonly outbox: MailOutboxService,
    private readonly audit: AuditService,
    private readonly emitter: EventEmitter2,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  /**
   * The link for the first administrator, while nobody can sign in; an earlier one stops working.
   *
   * @param email when it is known; otherwise whoever follows the link names it
   * @returns the link, or null when there is somebody already
   */
  createFirst(email?: string): Promise<string | null> {
    const demo = this.config.get('DEMO', { infer: true });
    return this.transactions.run(async (manager) => {
      // The demo's people count for nobody once the service is no demo any more.
      if (await manager.existsBy(User, demo ? {} : { demo: false })) return null;
      await manager.update(
        Invitation,
        { owner: true, acceptedAt: IsNull(), revokedAt: IsNull() },
        { revokedAt: new Date() },
      );
      const { token } = await this.add(manager, 'invitation', {
        email: email ? normalEmail(email) : null,
        name: '',
        owner: true,
      });
      return this.linkOf(token);
    });
  }

  /**
   * Invites somebody to sites that `by` administers and mails them the link.
   *
   * @throws ForbiddenException for a role on any other site
   * @throws ConflictException when they have a role on one of the sites already
   */
  async invite(
    by: SignedInUser,
    { email, name, roles }: { email: string; name: string; roles: SiteRole[] },
  ): Promise<Invitation> {
    requireOwnSites(by, roles);
    const address = normalEmail(email);
    const invitation = await this.transactions.run(async (manager) => {
      const known = await manager.findOne(User, { where: { email: address }, relations: { roles: true } });
      if (known?.roles.some(({ siteId }) => roles.some((role) => role.siteId === siteId)))
        throw new ConflictException(
          `${known.name} <${address}> has a role on this site already; change it there`,
        );
      const { invitation, token } = await this.add(manager, 'invitation', {
        email: address,
        name: name.trim(),
        roles,
        createdById: by.id,
      });
      const siteRoles = await this.named(manager, roles);
      await this.outbox.enqueue(manager, {
        key: `invitation ${invitation.id}`,
        to: address,
        siteId: roles[0]?.siteId ?? null,
        subject: 'You are invited to Polewright',
        ...composeMail({
          greeting: `Good day ${name.trim()},`,
          paragraphs: [
            `${by.name} invites you to Polewright, which keeps the position-controlled axes of your works in tune:`,
            ...siteRoles.map(({ siteName, role }) => `${siteName}: ${role}`),
          ],
          link: { label: 'Accept and choose a password', url: this.linkOf(token) },
          closing: `The link works once, until ${invitation.expiresAt.toISOString().slice(0, 10)}.`,
        }),
      });
      await this.auditForSites(manager, by, 'person.invited', invitation);
      return invitation;
    });
    return invitation;
  }

  /** Open invitations to sites that a person administers. */
  async open(by: SignedInUser): Promise<Invitation[]> {
    const administered = sitesOf(by, 'people.manage');
    const open = await this.invitations.find({
      where: {
        purpose: 'invitation',
        acceptedAt: IsNull(),
        revokedAt: IsNull(),
        expiresAt: MoreThan(new Date()),
      },
      order: { id: 'DESC' },
    });
    return open.filter(({ roles }) => roles.some(({ siteId }) => administered.includes(siteId)));
  }

  /** @throws NotFoundException, ForbiddenException when it also concerns sites of others */
  async revoke(by: SignedInUser, id: number): Promise<void> {
    const invitation = (await this.open(by)).find((one) => one.id === id);
    if (!invitation) throw new NotFoundException(`There is no open invitation ${id}`);
    requireOwnSites(by, invitation.roles);
    await this.transactions.run(async (manager) => {
      const { affected } = await manager.update(
        Invitation,
        { id, acceptedAt: IsNull(), revokedAt: IsNull() },
        { revokedAt: new Date() },
      );
      if (!affected) throw new ConflictException('The invitation was accepted or withdrawn in the meantime');
      await this.auditForSites(manager, by, 'invitation.withdrawn', invitation);
    });
  }

  /** Mails a link to choose a new password, if the address has an account; says nothing either way. */
  async requestReset(email: string): Promise<void> {
    await this.transactions.run(async (manager) => {
      const user = await manager.findOneBy(User, { email: normalEmail(email), disabled: false });
      if (!user) return;
      const since = new Date(Date.now() + LIFETIME['password-reset'] - RESET_PAUSE);
      const pending = {
        purpose: 'password-reset',
        userId: user.id,
        acceptedAt: IsNull(),
        revokedAt: IsNull(),
      } as const;
      if (await manager.existsBy(Invitation, { ...pending, expiresAt: MoreThan(since) })) return;
      await manager.update(Invitation, pending, { revokedAt: new Date() });
      const { invitation, token } = await this.add(manager, 'password-reset', {
        email: user.email,
        name: user.name,
        userId: user.id,
      });
      await this.outbox.enqueue(manager, {
        key: `password reset ${invitation.id}`,
        to: user.email,
        subject: 'Choose a new Polewright password',
        ...composeMail({
          greeting: `Good day ${user.name},`,
          paragraphs: [
            'somebody, probably you, asked for a new password. Your present one works until you choose it.',
          ],
          link: { label: 'Choose a new password', url: this.linkOf(token) },
          closing: 'The link works once, for an hour. If you did not ask for it, do nothing.',
        }),
      });
    });
  }

  async view(token: string): Promise<InvitationView> {
    const manager = this.invitations.manager;
    const invitation = await this.find(manager, token);
    return {
      purpose: invitation.purpose,
      name: invitation.name,
      email: invitation.email,
      existing:
        invitation.purpose === 'invitation' &&
        invitation.email !== null &&
        (await manager.existsBy(User, { email: invitation.email })),
      siteRoles: await this.named(manager, invitation.roles),
    };
  }

  /**
   * Makes the account, adds the roles to the account that the address has, or sets the new password; then signs in.
   *
   * @param address of the client
   * @throws NotFoundException when the link is unknown, used, withdrawn or too old
   */
  async accept(
    token: string,
    given: { name?: string; password: string; email?: string },
    address: string,
  ): Promise<OpenedSession> {
    const invitation = await this.find(this.invitations.manager, token);
    const email = invitation.email ?? normalEmail(given.email ?? '');
    if (!email)
      throw new BadRequestException({ errors: [{ path: 'email', message: 'Your address is needed' }] });
    const name = given.name?.trim() || invitation.name;
    if (!name) throw new BadRequestException({ errors: [{ path: 'name', message: 'Your name is needed' }] });
    const known = await this.invitations.manager.findOneBy(User, { email });
    if (known && invitation.purpose === 'invitation') {
      // The mailbox alone does not open an account that has a password.
      const session = await this.auth.signIn(email, given.password, address);
      await this.transactions.run((manager) => this.addRoles(manager, token, known));
      tell(this.emitter, 'person.changed', { userId: known.id });
      return { ...session, user: await this.auth.userFromAccessToken(session.accessToken) };
    }
    const passwordHash = await hashPassword(given.password);
    const userId = await this.transactions.run((manager) =>
      invitation.purpose === 'password-reset'
        ? this.resetPassword(manager, token, passwordHash)
        : this.addPerson(manager, token, { name, email, passwordHash }),
    );
    tell(this.emitter, 'person.changed', { userId });
    return this.auth.open(userId);
  }

  private async addPerson(
    manager: EntityManager,
    token: string,
    { name, email, passwordHash }: Pick<User, 'name' | 'email' | 'passwordHash'>,
  ): Promise<number> {
    const invitation = await this.take(manager, token);
    if (await manager.existsBy(User, { email }))
      throw new ConflictException('This address has an account already; open the link again');
    const user = await manager.save(
      manager.create(User, { name, email, passwordHash, owner: invitation.owner, lastSignInAt: null }),
    );
    await this.addRolesOf(manager, invitation, user);
    return user.id;
  }

  private async addRoles(manager: EntityManager, token: string, user: User): Promise<void> {
    await this.addRolesOf(manager, await this.take(manager, token), user);
  }

  private async addRolesOf(manager: EntityManager, invitation: Invitation, user: User): Promise<void> {
    for (const { siteId, role } of invitation.roles)
      // A role given since the invitation is the later word.
      if (!(await manager.existsBy(UserRole, { userId: user.id, siteId })))
        await manager.insert(UserRole, { userId: user.id, siteId, role });
    if (invitation.owner && !user.owner) await manager.update(User, user.id, { owner: true });
    const by = {
      id: user.id,
      name: user.name,
      email: user.email,
      owner: user.owner,
      roles: invitation.roles,
    };
    for (const siteId of sitesConcerned(invitation.roles))
      await this.audit.record(manager, {
        user: by,
        action: 'invitation.accepted',
        subject: { type: 'person', id: user.id },
        siteId,
        after: {
          email: user.email,
          role: invitation.roles.find((role) => role.siteId === siteId)?.role ?? 'owner',
        },
      });
  }

  private async resetPassword(manager: EntityManager, token: string, passwordHash: string): Promise<number> {
    const { userId } = await this.take(manager, token);
    const user = await manager.findOneBy(User, { id: userId ?? -1, disabled: false });
    if (!user) throw new ForbiddenException('This account is disabled; ask an administrator of your site');
    await manager.update(User, user.id, { passwordHash });
    await this.sessions.endAllOf(manager, user.id);
    await this.audit.record(manager, {
      user: { id: user.id, name: user.name, email: user.email, owner: user.owner, roles: [] },
      action: 'password.reset',
      subject: { type: 'person', id: user.id },
    });
    return user.id;
  }

  /** Marks the invitation as used, within the unit of work that uses it: a link works once. */
  private async take(manager: EntityManager, token: string): Promise<Invitation> {
    const invitation = await this.find(manager, token);
    await manager.update(Invitation, invitation.id, { acceptedAt: new Date() });
    return invitation;
  }

  private async find(manager: EntityManager, token: string): Promise<Invitation> {
    const invitation = await manager.findOneBy(Invitation, { tokenHash: hashOfToken(token) });
    if (!invitation) throw new NotFoundException('There is no such invitation');
    if (invitation.acceptedAt || invitation.revokedAt || invitation.expiresAt <= new Date())
      throw new HttpException(
        'This link was used, withdrawn or is too old; ask for a new one',
        HttpStatus.GONE,
      );
    return invitation;
  }

  private async add(
    manager: EntityManager,
    purpose: InvitationPurpose,
    fields: Pick<Invitation, 'email' | 'name'> &
      Partial<Pick<Invitation, 'roles' | 'owner' | 'userId' | 'createdById'>>,
  ): Promise<{ invitation: Invitation; token: string }> {
    const token = newToken();
    const invitation = await manager.save(
      manager.create(Invitation, {
        purpose,
        roles: [],
        ...fields,
        tokenHash: hashOfToken(token),
        expiresAt: new Date(Date.now() + LIFETIME[purpose]),
      }),
    );
    return { invitation, token };
  }

  private async auditForSites(
    manager: EntityManager,
    user: SignedInUser,
    action: string,
    { id, email, roles }: Invitation,
  ): Promise<void> {
    for (const { siteId, role } of roles)
      await this.audit.record(manager, {
        user,
        action,
        subject: { type: 'invitation', id },
        siteId,
        after: { email, role },
      });
  }

  private async named(manager: EntityManager, roles: SiteRole[]): Promise<InvitationView['siteRoles']> {
    const sites = await manager.findBy(Site, { id: In(roles.map(({ siteId }) => siteId)) });
    return roles.map(({ siteId, role }) => ({
      siteName: sites.find(({ id }) => id === siteId)?.name ?? '',
      role,
    }));
  }

  private linkOf(token: string): string {
    return `${this.config.get('PUBLIC_URL', { infer: true })}/invitation/${token}`;
  }
}

/** An entry in the record for each site; the owner's invitation has none, and one entry. */
const sitesConcerned = (roles: SiteRole[]): (number | null)[] =>
  roles.length > 0 ? roles.map(({ siteId }) => siteId) : [null];

/** @throws ForbiddenException when a role is on a site that the person does not administer */
export function requireOwnSites(by: SignedInUser, roles: SiteRole[]): void {
  const administered = sitesOf(by, 'people.manage');
  if (administered.length === 0) throw new ForbiddenException('People are for administrators');
  const foreign = roles.find(({ siteId }) => !administered.includes(siteId));
  if (foreign) throw new ForbiddenException(`You do not administer site ${foreign.siteId}`);
}
