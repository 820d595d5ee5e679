import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import twilio from 'twilio';
import type RequestClient from 'twilio/lib/base/RequestClient.js';
import type { Settings, SmsSettings } from '../settings.js';
import { Refused, type ChannelSender } from './channels.js';
import type { Mail } from './mail.entity.js';

/** ms */
const TIMEOUT = 10_000;

/** SMS by Twilio's interface; off unless the environment names an account. */
@Injectable()
export class Sms implements ChannelSender {
  private readonly settings: SmsSettings | null;
  private readonly client: twilio.Twilio | null;

  constructor(config: ConfigService<Settings, true>) {
    this.settings = config.get('SMS', { infer: true });
    this.client =
      this.settings &&
      twilio(this.settings.accountSid, this.settings.authToken, {
        timeout: TIMEOUT,
        ...(this.settings.apiUrl && { httpClient: new ElsewhereClient(this.settings.apiUrl) }),
      });
  }

  get offered(): boolean {
    return this.client !== null;
  }

  async send({ to, subject, text }: Mail): Promise<void> {
    if (!this.client || !this.settings) throw new Refused('SMS is not set up here');
    try {
      await this.client.messages.create({ to, from: this.settings.from, body: `${subject}. ${text}` });
    } catch (error) {
      const { status, message } = error as { status?: number; message: string };
      if (status !== undefined && status >= 400 && status < 500 && status !== 429) throw new Refused(message);
      throw error;
    }
  }
}

/** The same interface at another address, such as a relay within the plant. */
class ElsewhereClient extends twilio.RequestClient {
  constructor(private readonly origin: string) {
    super({ timeout: TIMEOUT });
  }

  override request<T>(options: RequestClient.RequestOptions<T>) {
    const { pathname, search } = new URL(options.uri);
    return super.request<T>({ ...options, uri: new URL(pathname + search, this.origin).href });
  }
}
