import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { InjectRepository } from '@nestjs/typeorm';
import { existsSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import type { Repository } from 'typeorm';
import webPush from 'web-push';
import type { Settings } from '../settings.js';
import { Refused, type ChannelSender } from './channels.js';
import type { Mail } from './mail.entity.js';
import { PushSubscription } from './push-subscription.entity.js';

/** s for which a push service keeps a message for a browser that is not there */
const TTL = 3_600;
/** ms */
const TIMEOUT = 10_000;

interface PushKeys {
  publicKey: string;
  privateKey: string;
}

/** Push messages to browsers (RFC 8030), encrypted for the browser (RFC 8291), signed by this installation (RFC 8292). */
@Injectable()
export class WebPush implements ChannelSender {
  private readonly keys: PushKeys;
  private readonly subject: string;

  constructor(
    @InjectRepository(PushSubscription) private readonly subscriptions: Repository<PushSubscription>,
    config: ConfigService<Settings, true>,
  ) {
    this.keys = keysOf(config.get('DATA_DIR', { infer: true }));
    const from = config.get('MAIL_FROM', { infer: true });
    this.subject = `mailto:${/<(.+)>/.exec(from)?.[1] ?? from}`;
  }

  /** What a browser needs to subscribe. */
  get publicKey(): string {
    return this.keys.publicKey;
  }

  /** `to` is a subscription's number, the subject its title. A subscription that its browser ended is forgotten. */
  async send({ to, key, subject, text, alertId }: Mail): Promise<void> {
    const subscription = await this.subscriptions.findOneBy({ id: Number(to) });
    if (!subscription) throw new Refused('The browser no longer takes messages');
    const { endpoint, p256dh, auth } = subscription;
    const url = alertId === null ? '/alerts' : `/alerts/${alertId}`;
    const { headers, body, method } = webPush.generateRequestDetails(
      { endpoint, keys: { p256dh, auth } },
      JSON.stringify({ title: subject, body: text, url, tag: key }),
      { TTL, urgency: 'high', vapidDetails: { subject: this.subject, ...this.keys } },
    );
    const answer = await fetch(endpoint, {
      method,
      headers: headers as Record<string, string>,
      body: new Uint8Array(body!),
      redirect: 'error',
      signal: AbortSignal.timeout(TIMEOUT),
    });
    if (answer.ok) return;
    if (answer.status === 404 || answer.status === 410) {
      await this.subscriptions.delete(subscription.id);
      throw new Refused('The browser no longer takes messages');
    }
    const words = `The push service answered ${answer.status}`;
    // Too many or out of order may pass; what it does not understand will not.
    throw answer.status === 429 || answer.status >= 500 ? new Error(words) : new Refused(words);
  }
}

/** The keys of this installation, made at the first start and kept beside the database. */
function keysOf(folder: string): PushKeys {
  const path = join(folder, 'push-keys.json');
  if (!existsSync(path)) writeFileSync(path, JSON.stringify(webPush.generateVAPIDKeys()), { mode: 0o600 });
  return JSON.parse(readFileSync(path, 'utf8')) as PushKeys;
}
