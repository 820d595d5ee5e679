import { hash, verify } from '@node-rs/argon2';
import { createHash, randomBytes } from 'node:crypto';

/** argon2id with 19 MiB, 2 passes, 1 lane: OWASP Password Storage Cheat Sheet, second of its equal choices (from memory). */
const ARGON2ID = { algorithm: 2, memoryCost: 19_456, timeCost: 2, parallelism: 1 } as const;

/** Length only, no rules on characters: NIST SP 800-63B 5.1.1.2 (from memory), which asks for at least 8. */
export const PASSWORD_LENGTH = { min: 10, max: 200 } as const;

/** argon2id of a password in PHC string format; tens of milliseconds off the event loop. */
export const hashPassword = (password: string): Promise<string> => hash(password, ARGON2ID);

export const verifyPassword = (passwordHash: string, password: string): Promise<boolean> =>
  verify(passwordHash, password);

let hashOfNobody: Promise<string> | undefined;
/** Takes the time of a real check and always fails: an unknown address must not answer sooner than a known one. */
export async function verifyNobody(password: string): Promise<false> {
  hashOfNobody ??= hashPassword(randomBytes(16).toString('hex'));
  await verifyPassword(await hashOfNobody, password);
  return false;
}

/** A secret for a link or a cookie: 256 random bits, base64url. */
export const newToken = (): string => randomBytes(32).toString('base64url');

/** What is kept of a token. Its 256 bits cannot be guessed, so that a fast hash is enough. */
export const hashOfToken = (token: string): string => createHash('sha256').update(token).digest('hex');
