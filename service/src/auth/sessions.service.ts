import { Injectable, UnauthorizedException } from '@nestjs/common';
import { randomUUID } from 'node:crypto';
import { InjectRepository } from '@nestjs/typeorm';
import { IsNull, LessThan, MoreThan, Not, type EntityManager, Repository } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { Transactions } from '../database/transactions.js';
import { refusedTokens } from './auth-metrics.js';
import { hashOfToken, newToken } from './passwords.js';
import { RefreshToken } from './refresh-token.entity.js';

/** How long a browser may stay away and still be signed in: a week covers days off; ms. */
export const REFRESH_LIFETIME = 7 * 24 * 3_600_000;

export interface Session {
  userId: number;
  /** Names the sign-in; every token that descends from it carries it. */
  family: string;
  refreshToken: string;
}

/**
 * Sign-ins as families of refresh tokens. Each token is good once and gives the next (rotation, RFC 9700, 4.14.2). A
 * token that comes a second time was copied: the whole family ends, and with it its access tokens.
 */
@Injectable()
export class SessionsService {
  constructor(
    @InjectRepository(RefreshToken) private readonly tokens: Repository<RefreshToken>,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
  ) {}

  start(userId: number): Promise<Session> {
    return this.transactions.run(async (manager) => {
      await manager.delete(RefreshToken, { userId, expiresAt: LessThan(new Date()) });
      return this.add(manager, userId, randomUUID());
    });
  }

  /** @throws UnauthorizedException when the token is unknown, over, revoked or used before */
  async renew(refreshToken: string | undefined): Promise<Session> {
    const outcome = await this.transactions.run(async (manager) => {
      const token = refreshToken
        ? await manager.findOneBy(RefreshToken, { tokenHash: hashOfToken(refreshToken) })
        : null;
      if (!token) return 'unknown';
      if (token.revokedAt) return 'revoked';
      if (token.expiresAt <= new Date()) return 'expired';
      if (token.usedAt) {
        await manager.update(RefreshToken, { family: token.family }, { revokedAt: new Date() });
        await this.audit.record(manager, {
          user: null,
          action: 'session.ended',
          subject: { type: 'person', id: token.userId },
          note: 'A refresh token was used twice',
        });
        return 'reused';
      }
      await manager.update(RefreshToken, token.id, { usedAt: new Date() });
      return this.add(manager, token.userId, token.family);
    });
    if (typeof outcome !== 'string') return outcome;
    refusedTokens.inc({ reason: `refresh-${outcome}` });
    throw new UnauthorizedException('You are no longer signed in; sign in again');
  }

  /** The sign-in that a refresh token belongs to, if it still stands. */
  async familyOf(refreshToken: string | undefined): Promise<string | null> {
    if (!refreshToken) return null;
    const token = await this.tokens.findOneBy({ tokenHash: hashOfToken(refreshToken), revokedAt: IsNull() });
    return token?.family ?? null;
  }

  isOpen(family: string): Promise<boolean> {
    return this.tokens.existsBy({
      family,
      revokedAt: IsNull(),
      usedAt: IsNull(),
      expiresAt: MoreThan(new Date()),
    });
  }

  async end(refreshToken: string | undefined): Promise<void> {
    const family = await this.familyOf(refreshToken);
    if (family)
      await this.transactions.run((manager) =>
        manager.update(RefreshToken, { family }, { revokedAt: new Date() }),
      );
  }

  /** Ends every sign-in of a person, or every one but the given. */
  async endAllOf(manager: EntityManager, userId: number, exceptFamily?: string | null): Promise<void> {
    await manager.update(
      RefreshToken,
      { userId, revokedAt: IsNull(), ...(exceptFamily ? { family: Not(exceptFamily) } : {}) },
      { revokedAt: new Date() },
    );
  }

  private async add(manager: EntityManager, userId: number, family: string): Promise<Session> {
    const refreshToken = newToken();
    const createdAt = new Date();
    await manager.insert(RefreshToken, {
      userId,
      family,
      tokenHash: hashOfToken(refreshToken),
      createdAt,
      expiresAt: new Date(createdAt.getTime() + REFRESH_LIFETIME),
      usedAt: null,
      revokedAt: null,
    });
    return { userId, family, refreshToken };
  }
}
