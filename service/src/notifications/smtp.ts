import { Injectable, type OnApplicationShutdown } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Resvg } from '@resvg/resvg-js';
import { createTransport } from 'nodemailer';
import { createHash } from 'node:crypto';
import { createRequire } from 'node:module';
import type { Settings } from '../settings.js';
import { Refused, Uncertain, type ChannelSender } from './channels.js';
import { PERHAPS_AGAIN, PICTURE_CID, withNotice, withPicture } from './mail-text.js';
import type { Mail } from './mail.entity.js';

/** Connections to the mail server at most. */
const CONNECTIONS = 3;
/** ms; a mail server that hangs must not hold the outbox for long */
const TIMEOUT = 10_000;
/** Pixels of a picture for each of its own units: sharp on a phone. */
const PICTURE_SCALE = 2;

const require = createRequire(import.meta.url);
const FONT = require.resolve('dejavu-fonts-ttf/ttf/DejaVuSans.ttf');

/** Mails by SMTP. */
@Injectable()
export class Smtp implements ChannelSender, OnApplicationShutdown {
  private readonly transport;
  private readonly from: string;

  constructor(config: ConfigService<Settings, true>) {
    this.from = config.get('MAIL_FROM', { infer: true });
    const url = new URL(config.get('SMTP_URL', { infer: true }));
    this.transport = createTransport({
      pool: true,
      host: url.hostname,
      port: Number(url.port || (url.protocol === 'smtps:' ? 465 : 587)),
      secure: url.protocol === 'smtps:',
      maxConnections: CONNECTIONS,
      connectionTimeout: TIMEOUT,
      greetingTimeout: TIMEOUT,
      socketTimeout: TIMEOUT,
      ...(url.username
        ? { auth: { user: decodeURIComponent(url.username), pass: decodeURIComponent(url.password) } }
        : {}),
    });
  }

  onApplicationShutdown(): void {
    this.transport.close();
  }

  /** Its Message-ID stays the same however often it is sent, by which mail programs know a copy. */
  async send(mail: Mail): Promise<void> {
    const { text, html } = lettersOf(mail);
    try {
      await this.transport.sendMail({
        from: this.from,
        to: mail.to,
        subject: mail.perhapsAgain ? `(perhaps again) ${mail.subject}` : mail.subject,
        text,
        html,
        messageId: `<${createHash('sha256').update(mail.key).digest('hex').slice(0, 32)}@polewright>`,
        headers: { 'Auto-Submitted': 'auto-generated' },
        ...(mail.picture && {
          attachments: [
            {
              filename: 'axis.png',
              content: pngOf(mail.picture),
              cid: PICTURE_CID,
              contentType: 'image/png',
            },
          ],
        }),
      });
    } catch (error) {
      throw judged(error);
    }
  }
}

/** What is written in a mail: its own text, the picture's under it, and above all else whether it may be a copy. */
function lettersOf(mail: Mail): { text: string; html: string } {
  const shown = mail.picture ? withPicture(mail, mail.pictureText ?? '') : mail;
  return mail.perhapsAgain ? withNotice(shown, PERHAPS_AGAIN) : shown;
}

/** How nodemailer words a connection that ended after it had stood: the mail may have been taken by then. */
const BROKEN_OFF = ['Connection closed unexpectedly', 'Timeout'];

/** RFC 5321, 4.2.1: 5yz is a mail server's last word. */
function judged(error: unknown): unknown {
  const { code, responseCode, message } = error as {
    code?: string;
    responseCode?: number;
    message: string;
  };
  if ((code === 'EENVELOPE' || code === 'EMESSAGE') && responseCode !== undefined && responseCode >= 500)
    return new Refused(message);
  if (BROKEN_OFF.includes(message)) return new Uncertain(message);
  return error;
}

/** A picture as PNG: mail programs do not show SVG. */
export const pngOf = (svg: string): Buffer =>
  Buffer.from(
    new Resvg(svg, {
      fitTo: { mode: 'zoom', value: PICTURE_SCALE },
      font: { fontFiles: [FONT], loadSystemFonts: false, defaultFontFamily: 'DejaVu Sans' },
    })
      .render()
      .asPng(),
  );
