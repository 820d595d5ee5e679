import { In, type EntityManager } from 'typeorm';
import { composeMail } from './mail-text.js';
import { Mail } from './mail.entity.js';

/** More than this many alerts in `FLOOD_SPAN` are a flood (ANSI/ISA-18.2-2016 and EEMUA 191, from memory). */
export const FLOOD_COUNT = 10;
/** ms */
export const FLOOD_SPAN = 600_000;
/** ms between two mails of a flood to the same person (common practice, no source) */
const GROUP_PAUSE = 300_000;
/** Alerts that a grouped mail names; the page has them all. */
const NAMED = 40;
/** Rows that are written at once. */
const CHUNK = 500;

const GROUP_KEY = 'group ';

interface Waiting {
  to: string;
  first: number;
}

/**
 * In a flood puts the alert mails that wait for one person into one: the first at once, further ones every five minutes.
 * Mails that wait for the next group become due with it. Runs in the sender's own unit of work, so that a mail goes out
 * alone or in a group, never both.
 */
export async function groupFlood(manager: EntityManager, now: Date, publicUrl: string): Promise<void> {
  const waiting: Waiting[] = await manager
    .createQueryBuilder(Mail, 'mail')
    .select('mail.to', 'to')
    .addSelect('MIN(mail.id)', 'first')
    .where(`mail.state = 'queued' AND mail.channel = 'mail' AND mail.alertId IS NOT NULL`)
    .andWhere('mail.attempts = 0 AND mail.startedAt IS NULL AND mail.nextAttemptAt <= :now', { now })
    .groupBy('mail.to')
    .having('COUNT(*) > 1')
    .getRawMany();
  for (const { to, first } of waiting) {
    const lately = await manager
      .createQueryBuilder(Mail, 'mail')
      .where(`mail.to = :to AND mail.channel = 'mail' AND mail.alertId IS NOT NULL`, { to })
      .andWhere('mail.createdAt > :since', { since: new Date(now.getTime() - FLOOD_SPAN) })
      .getCount();
    if (lately <= FLOOD_COUNT) continue;
    await groupOf(manager, to, first, now, publicUrl);
  }
}

async function groupOf(
  manager: EntityManager,
  to: string,
  first: number,
  now: Date,
  publicUrl: string,
): Promise<void> {
  const due = `"to" = :to AND "state" = 'queued' AND "channel" = 'mail' AND "alertId" IS NOT NULL
    AND "attempts" = 0 AND "startedAt" IS NULL AND "nextAttemptAt" <= :now`;
  const last = await manager
    .createQueryBuilder(Mail, 'mail')
    .where('mail.to = :to AND mail.key LIKE :key', { to, key: `${GROUP_KEY}%` })
    .orderBy('mail.id', 'DESC')
    .limit(1)
    .getOne();
  const next = last && new Date(last.createdAt.getTime() + GROUP_PAUSE);
  if (next && next > now) {
    await manager
      .createQueryBuilder()
      .update(Mail)
      .set({ nextAttemptAt: next })
      .where(due, { to, now })
      .execute();
    return;
  }
  const mails = await manager
    .createQueryBuilder(Mail, 'mail')
    .select(['mail.id', 'mail.subject', 'mail.alertId', 'mail.siteId'])
    .where(due.replaceAll(/"(\w+)"/g, 'mail.$1'), { to, now })
    .orderBy('mail.id')
    .getMany();
  const more = mails.length - NAMED;
  const group = await manager.save(
    manager.create(Mail, {
      key: `${GROUP_KEY}${to} ${first}`,
      to,
      subject: `Flood of alerts: ${mails.length} wait`,
      ...composeMail({
        greeting: `${mails.length} alerts wait for you; more than ${FLOOD_COUNT} came within ten minutes.`,
        paragraphs: [
          ...mails
            .slice(0, NAMED)
            .map(({ subject, alertId }) => `${subject}: ${publicUrl}/alerts/${alertId}`),
          ...(more > 0 ? [`… and ${more} more.`] : []),
          'One cause may stand behind many alerts: look for what they share, such as a gateway or a supply.',
        ],
        link: { label: 'Open the alerts', url: `${publicUrl}/alerts` },
        closing:
          'Until the flood is over its mails come together, every five minutes at most. Machines can move unexpectedly. Follow the site’s lockout and machine-safety procedures and local codes.',
      }),
      siteId: mails.find(({ siteId }) => siteId !== null)?.siteId ?? null,
      nextAttemptAt: now,
      createdAt: now,
    }),
  );
  for (let i = 0; i < mails.length; i += CHUNK)
    await manager.update(
      Mail,
      { id: In(mails.slice(i, i + CHUNK).map(({ id }) => id)) },
      { state: 'grouped', groupId: group.id },
    );
}
