import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { createHmac, timingSafeEqual } from 'node:crypto';
import { IsNull, type EntityManager } from 'typeorm';
import type { Settings } from '../settings.js';
import { AcknowledgeLink } from './acknowledge-link.entity.js';

/** ms; a shift and its hand-over (common practice, no source) */
const LIFETIME = 12 * 3_600_000;

export interface LinkedAlert {
  id: number;
  raisedAt: Date;
}

/**
 * Links in mails that acknowledge an alert for the person whom the mail was for. The address carries the link's number,
 * its end and a signature of both (HMAC-SHA-256, RFC 2104, under a key of this use alone); the row says whether it was
 * used.
 */
@Injectable()
export class AcknowledgeLinksService {
  private readonly key: Buffer;
  private readonly publicUrl: string;

  constructor(config: ConfigService<Settings, true>) {
    this.key = createHmac('sha256', config.get('JWT_SECRET', { infer: true }))
      .update('acknowledge links')
      .digest();
    this.publicUrl = config.get('PUBLIC_URL', { infer: true });
  }

  /** A new link, written in the unit of work of the mail that carries it. */
  async make(manager: EntityManager, alert: LinkedAlert, userId: number, now: Date): Promise<string> {
    const expiresAt = new Date(now.getTime() + LIFETIME);
    const { id } = await manager.save(
      manager.create(AcknowledgeLink, { alertId: alert.id, raisedAt: alert.raisedAt, userId, expiresAt }),
    );
    return `${this.publicUrl}/acknowledge/${this.token(id, expiresAt)}`;
  }

  /** The link that a token stands for, whether or not it is used or over; null when the token is none of ours. */
  async find(manager: EntityManager, token: string): Promise<AcknowledgeLink | null> {
    const [id, end, signature] = token.split('.');
    if (!id || !end || !signature) return null;
    const expected = Buffer.from(this.sign(`${id}.${end}`));
    const given = Buffer.from(signature);
    if (expected.length !== given.length || !timingSafeEqual(expected, given)) return null;
    return manager.findOneBy(AcknowledgeLink, { id: parseInt(id, 36) });
  }

  /** Uses a link up. */
  async use(manager: EntityManager, id: number, at: Date): Promise<void> {
    await manager.update(AcknowledgeLink, { id, usedAt: IsNull() }, { usedAt: at });
  }

  private token(id: number, expiresAt: Date): string {
    const text = `${id.toString(36)}.${expiresAt.getTime().toString(36)}`;
    return `${text}.${this.sign(text)}`;
  }

  private sign(text: string): string {
    return createHmac('sha256', this.key).update(text).digest('base64url');
  }
}
