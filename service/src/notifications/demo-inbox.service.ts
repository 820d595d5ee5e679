import { BadGatewayException, Injectable, NotFoundException } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import type { Settings } from '../settings.js';
import type { DemoInboxDto } from './dto/mail.dto.js';

/** ms */
const TIMEOUT = 3_000;

/** The demo's inbox: what the local mail server took, read through the service so that the page has one origin. */
@Injectable()
export class DemoInboxService {
  constructor(private readonly config: ConfigService<Settings, true>) {}

  /**
   * @throws NotFoundException when the service does not run as a demo
   * @throws BadGatewayException when the local mail server does not answer
   */
  async messages(): Promise<DemoInboxDto> {
    const url = this.config.get('MAIL_INBOX_URL', { infer: true });
    if (!url || !this.config.get('DEMO', { infer: true }))
      throw new NotFoundException('There is no demo inbox');
    try {
      const answer = await fetch(new URL('/messages', url), { signal: AbortSignal.timeout(TIMEOUT) });
      if (!answer.ok) throw new Error(`it answered ${answer.status}`);
      const { items } = (await answer.json()) as DemoInboxDto;
      return { items };
    } catch (error) {
      throw new BadGatewayException(`The demo's mail server does not answer (${(error as Error).message})`);
    }
  }
}
