import type { Mail } from './mail.entity.js';

/** A way out for what the outbox holds. */
export interface ChannelSender {
  /** Hands a message over; resolves when it was taken. */
  send(message: Mail): Promise<void>;
}

/** The other side's last word about this one message: a further attempt cannot help. */
export class Refused extends Error {}

/** The connection broke when everything had been handed over: nobody knows whether the message was taken. */
export class Uncertain extends Error {}
