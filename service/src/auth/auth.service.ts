import { BadRequestException, Injectable, UnauthorizedException } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { JwtService } from '@nestjs/jwt';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { AuditService, SERVICE_NAME } from '../audit/audit.service.js';
import { Transactions } from '../database/transactions.js';
import { User } from '../people/user.entity.js';
import type { Settings } from '../settings.js';
import { refusedTokens, signIns } from './auth-metrics.js';
import { hashPassword, verifyNobody, verifyPassword } from './passwords.js';
import { SessionsService, type Session } from './sessions.service.js';
import { SignInLimiter } from './sign-in-limiter.js';
import type { SignedInUser } from './signed-in-user.js';

/** What an access token says: whose it is and from which sign-in. */
export interface AccessClaims {
  sub: number;
  sid: string;
}

export interface OpenedSession {
  accessToken: string;
  refreshToken: string;
  user: SignedInUser;
}

const asSignedIn = (user: User): SignedInUser => ({
  id: user.id,
  name: user.name,
  email: user.email,
  owner: user.owner,
  roles: user.roles.map(({ siteId, role }) => ({ siteId, role })),
});

/** The form in which an address is kept and compared. */
export const normalEmail = (email: string): string => email.trim().toLowerCase();

@Injectable()
export class AuthService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly sessions: SessionsService,
    private readonly limiter: SignInLimiter,
    private readonly jwt: JwtService,
    private readonly audit: AuditService,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  /**
   * Checks address and password and opens a session.
   *
   * @param address of the client, which has a limit of failures of its own
   * @throws UnauthorizedException without saying whether the address is known
   * @throws TooManyAttemptsException
   */
  async signIn(email: string, password: string, address: string): Promise<OpenedSession> {
    const account = normalEmail(email);
    const succeeded = this.attempt(account, address);
    const user = await this.find('user.email = :key', account);
    const right = user ? await verifyPassword(user.passwordHash, password) : await verifyNobody(password);
    if (!user || !right) {
      signIns.inc({ result: 'wrong' });
      throw new UnauthorizedException('Email or password is wrong');
    }
    succeeded();
    if (this.isShutOut(user)) {
      signIns.inc({ result: 'shut-out' });
      throw new UnauthorizedException('This account is disabled; ask an administrator of your site');
    }
    signIns.inc({ result: 'ok' });
    return this.open(user.id);
  }

  /** Opens a session for somebody whose identity is already proved. */
  async open(userId: number): Promise<OpenedSession> {
    const session = await this.sessions.start(userId);
    await this.transactions.run((manager) => manager.update(User, userId, { lastSignInAt: new Date() }));
    return this.answer(session);
  }

  /** @throws UnauthorizedException */
  async refresh(refreshToken: string | undefined): Promise<OpenedSession> {
    return this.answer(await this.sessions.renew(refreshToken));
  }

  signOut(refreshToken: string | undefined): Promise<void> {
    return this.sessions.end(refreshToken);
  }

  /**
   * Whether a password is that of a person, as asked before a dangerous step.
   *
   * @throws TooManyAttemptsException
   */
  async passwordIsOf(userId: number, password: string): Promise<boolean> {
    const user = await this.find('user.id = :key', userId);
    if (!user) return false;
    const succeeded = this.attempt(user.email, null);
    const right = await verifyPassword(user.passwordHash, password);
    signIns.inc({ result: right ? 'confirmed' : 'wrong' });
    if (right) succeeded();
    return right;
  }

  /** A person's name for a page or the record; the service's own for what nobody did. */
  async nameOf(userId: number | null): Promise<string> {
    const user = userId === null ? null : await this.find('user.id = :key', userId);
    return user?.name ?? SERVICE_NAME;
  }

  /**
   * Changes a person's own password and ends their other sessions.
   *
   * @param refreshToken of the session that stays
   * @throws BadRequestException when the present password is wrong
   */
  async changePassword(
    user: SignedInUser,
    current: string,
    next: string,
    refreshToken: string | undefined,
  ): Promise<void> {
    if (!(await this.passwordIsOf(user.id, current)))
      throw new BadRequestException({
        errors: [{ path: 'current', message: 'This is not your present password' }],
      });
    const passwordHash = await hashPassword(next);
    const family = await this.sessions.familyOf(refreshToken);
    await this.transactions.run(async (manager) => {
      await manager.update(User, user.id, { passwordHash });
      await this.sessions.endAllOf(manager, user.id, family);
      await this.audit.record(manager, {
        user,
        action: 'password.changed',
        subject: { type: 'person', id: user.id },
      });
    });
  }

  /**
   * The person behind an access token, for requests and for connections alike.
   *
   * @throws UnauthorizedException with the reason in words
   */
  async userFromAccessToken(token: string): Promise<SignedInUser> {
    let claims: AccessClaims;
    try {
      claims = await this.jwt.verifyAsync<AccessClaims>(token);
    } catch (error) {
      throw this.refusal(error);
    }
    return this.userOfClaims(claims);
  }

  /** @throws UnauthorizedException when the person is shut out or the sign-in has ended */
  async userOfClaims({ sub, sid }: AccessClaims): Promise<SignedInUser> {
    const user = await this.find('user.id = :key', sub);
    if (!user || this.isShutOut(user)) {
      refusedTokens.inc({ reason: 'shut-out' });
      throw new UnauthorizedException('This account is disabled; ask an administrator of your site');
    }
    if (!(await this.sessions.isOpen(sid))) {
      refusedTokens.inc({ reason: 'ended' });
      throw new UnauthorizedException('You are no longer signed in; sign in again');
    }
    return asSignedIn(user);
  }

  /** A person by their number, without a sign-in of theirs; null when they are shut out. */
  async personById(userId: number): Promise<SignedInUser | null> {
    const user = await this.find('user.id = :key', userId);
    return user && !this.isShutOut(user) ? asSignedIn(user) : null;
  }

  /** Counts and words the refusal of a missing, expired or unreadable access token. */
  refusal(cause: unknown): UnauthorizedException {
    const name = cause instanceof Error ? cause.name : '';
    const [reason, detail] =
      name === 'TokenExpiredError'
        ? ['expired', 'The access token has expired; refresh it']
        : name === 'JsonWebTokenError' || name === 'NotBeforeError' || name === 'SyntaxError'
          ? ['invalid', 'The access token is not valid']
          : ['missing', 'Sign in first'];
    refusedTokens.inc({ reason });
    return new UnauthorizedException(detail);
  }

  private attempt(account: string, address: string | null): () => void {
    try {
      return this.limiter.attempt(account, address);
    } catch (error) {
      signIns.inc({ result: 'throttled' });
      throw error;
    }
  }

  /** The demo's people, whose password everybody knows, exist only while the service runs as a demo. */
  private isShutOut(user: User): boolean {
    return user.disabled || (user.demo && !this.config.get('DEMO', { infer: true }));
  }

  private find(where: string, key: number | string): Promise<User | null> {
    return this.dataSource
      .getRepository(User)
      .createQueryBuilder('user')
      .leftJoinAndSelect('user.roles', 'role')
      .where(where, { key })
      .orderBy('role.siteId')
      .getOne();
  }

  private async answer({ userId, family, refreshToken }: Session): Promise<OpenedSession> {
    const user = await this.userOfClaims({ sub: userId, sid: family });
    const claims: AccessClaims = { sub: userId, sid: family };
    return { accessToken: await this.jwt.signAsync(claims), refreshToken, user };
  }
}
