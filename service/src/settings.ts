import { randomBytes } from 'node:crypto';
import { existsSync, mkdirSync, mkdtempSync, readFileSync, rmdirSync, writeFileSync } from 'node:fs';
import { dirname, join, resolve } from 'node:path';

/** What the environment says, checked once at start; every other part reads it through Nest's ConfigService. */
export interface Settings {
  PORT: number;
  HOST: string;
  DATA_DIR: string;
  /** Path of the database file. */
  DATABASE: string;
  DEMO: boolean;
  /** Where people reach the pages; links in mails start with it. */
  PUBLIC_URL: string;
  SMTP_URL: string;
  MAIL_FROM: string;
  /** The demo's mail inbox, shown by the page; null without one. */
  MAIL_INBOX_URL: string | null;
  JWT_SECRET: string;
  /** The account that sends SMS; null: none is sent. */
  SMS: SmsSettings | null;
}

export interface SmsSettings {
  accountSid: string;
  authToken: string;
  /** The number that they come from, ITU-T E.164. */
  from: string;
  /** Where the interface is, when not at Twilio's own address. */
  apiUrl: string | null;
}

export class SettingsError extends Error {}

/**
 * Reads the settings.
 *
 * @throws SettingsError in plain words when a value is wrong or the data folder cannot be written
 */
export function readSettings(env: NodeJS.ProcessEnv): Settings {
  const port = Number(env.PORT ?? 4600);
  if (!Number.isInteger(port) || port < 0 || port > 65_535)
    throw new SettingsError(`PORT is "${env.PORT}"; it must be a whole number from 0 to 65535`);
  const dataDir = resolve(env.DATA_DIR ?? 'data');
  try {
    makeFolder(dataDir);
    // Tried, not asked: to a superuser a read-only file system and /proc look writable.
    rmdirSync(mkdtempSync(join(dataDir, '.write-')));
  } catch (error) {
    throw new SettingsError(
      `The data folder ${dataDir} cannot be written (${(error as Error).message}). Set DATA_DIR to one that can.`,
    );
  }
  const demo = (env.DEMO ?? '1') !== '0';
  return {
    PORT: port,
    HOST: env.HOST ?? '127.0.0.1',
    DATA_DIR: dataDir,
    DATABASE: join(dataDir, 'polewright.sqlite'),
    DEMO: demo,
    PUBLIC_URL: (env.PUBLIC_URL ?? `http://localhost:${port}`).replace(/\/$/, ''),
    SMTP_URL: env.SMTP_URL ?? 'smtp://127.0.0.1:4602',
    MAIL_FROM: env.MAIL_FROM ?? 'Polewright <polewright@tarnwick.example>',
    MAIL_INBOX_URL: demo ? (env.MAIL_INBOX_URL ?? 'http://127.0.0.1:4603') : null,
    JWT_SECRET: env.JWT_SECRET ?? secretOf(dataDir),
    SMS: smsOf(env),
  };
}

/** One level after another: below /proc, Node's own `recursive` never ends (seen with Node 20.20). */
function makeFolder(path: string): void {
  if (existsSync(path)) return;
  makeFolder(dirname(path));
  mkdirSync(path);
}

/** SMS is on when all three of the account's values are there, and wrong when only some are. */
function smsOf(env: NodeJS.ProcessEnv): SmsSettings | null {
  const { SMS_ACCOUNT_SID: accountSid, SMS_AUTH_TOKEN: authToken, SMS_FROM: from } = env;
  if (!accountSid && !authToken && !from) return null;
  if (!accountSid?.startsWith('AC') || !authToken || !/^\+[1-9]\d{6,14}$/.test(from ?? ''))
    throw new SettingsError(
      'SMS needs SMS_ACCOUNT_SID (it begins with AC), SMS_AUTH_TOKEN and SMS_FROM (a number such as +441632960123), or none of them.',
    );
  return { accountSid, authToken, from: from!, apiUrl: env.SMS_API_URL ?? null };
}

/** The signing secret of this installation, made at the first start and kept beside the database. */
function secretOf(dataDir: string): string {
  const path = join(dataDir, 'secret');
  if (!existsSync(path)) writeFileSync(path, randomBytes(48).toString('base64url'), { mode: 0o600 });
  return readFileSync(path, 'utf8').trim();
}
