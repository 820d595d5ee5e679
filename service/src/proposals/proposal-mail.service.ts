import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, LessThan, MoreThan, type DataSource, type EntityManager } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import { Axis } from '../fleet/axis.entity.js';
import { MailOutboxService } from '../notifications/mail-outbox.service.js';
import { composeMail } from '../notifications/mail-text.js';
import { User } from '../people/user.entity.js';
import { RotaService } from '../rota/rota.service.js';
import type { Settings } from '../settings.js';
import { Proposal } from './proposal.entity.js';

const HOUR = 3_600_000;
/** How long before a window opens people are reminded, ms; each once. */
const REMINDERS = [
  { name: 'day', before: 24 * HOUR },
  { name: 'hour', before: HOUR },
] as const;

interface Recipient {
  name: string;
  email: string;
}

interface Letter {
  /** A second mail with the same key to the same person is dropped. */
  key: string;
  subject: string;
  paragraphs: string[];
}

const SAFETY =
  'New gains can move an axis unexpectedly. Keep people clear and follow the site’s lockout/tagout and machine-safety procedures and local codes.';

/** Mails about changes at machines: to whoever worked on the proposal and to the person on call of its site. */
@Injectable()
export class ProposalMailService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly outbox: MailOutboxService,
    private readonly rota: RotaService,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  /** Gains left and were not read back. */
  async notApplied(manager: EntityManager, proposal: Proposal, eventId: number, why: string): Promise<void> {
    const axis = await this.axisOf(manager, proposal);
    await this.send(manager, proposal, new Date(), {
      key: `proposal ${proposal.id} event ${eventId}`,
      subject: `${axis.tag}: the gains were not applied`,
      paragraphs: [
        `${axis.tag}, ${axis.name}. ${axis.machine.name}, ${axis.site.name}.`,
        `${why}. They count as not applied, and revision ${axis.revision} was asked for again.`,
        'Until the machine has read that back, nobody knows which gains it runs with. Keep the axis in maintenance and look at the controller itself.',
      ],
    });
  }

  /** Before a maintenance window opens; a restart sends nothing twice, since each mail has its key. */
  @Interval(20_000)
  async remind(now = new Date()): Promise<void> {
    const soon = await this.dataSource.getRepository(Proposal).findBy({
      state: 'scheduled',
      windowFrom: LessThan(new Date(now.getTime() + REMINDERS[0].before)),
      windowTo: MoreThan(now),
    });
    for (const seen of soon)
      await this.transactions.run(async (manager) => {
        const proposal = await manager.findOneByOrFail(Proposal, { id: seen.id });
        const { windowFrom: from, windowTo: to } = proposal;
        if (proposal.state !== 'scheduled' || !from || !to) return;
        const due = REMINDERS.filter(({ before }) => now.getTime() >= from.getTime() - before).at(-1);
        if (!due) return;
        const axis = await this.axisOf(manager, proposal);
        const { timeZone } = axis.site;
        const clock = (at: Date): string =>
          at.toLocaleString('en-GB', { timeZone, dateStyle: 'medium', timeStyle: 'short' });
        await this.send(manager, proposal, from, {
          key: `proposal ${proposal.id} window ${from.getTime()} ${due.name}`,
          subject: `${axis.tag}: maintenance window from ${clock(from)}`,
          paragraphs: [
            `${axis.tag}, ${axis.name}. ${axis.machine.name}, ${axis.site.name}.`,
            `The approved gains can be applied from ${clock(from)} to ${clock(to)} (${timeZone}). After that the proposal expires.`,
            'At the machine: axis in maintenance and at rest, the checklist confirmed, your own password.',
          ],
        });
      });
  }

  private axisOf(manager: EntityManager, { axisId }: Proposal): Promise<Axis> {
    return manager.findOneOrFail(Axis, { where: { id: axisId }, relations: { machine: true, site: true } });
  }

  /** @param onCallAt the person on call at this time is told as well */
  private async send(
    manager: EntityManager,
    proposal: Proposal,
    onCallAt: Date,
    { key, subject, paragraphs }: Letter,
  ): Promise<void> {
    const { id, siteId, alteredById, submittedById, approvedById, appliedById } = proposal;
    const people = await manager.findBy(User, {
      id: In([alteredById, submittedById, approvedById, appliedById].filter((person) => person !== null)),
      disabled: false,
    });
    const onCall = await this.rota.onCall(siteId, onCallAt);
    const recipients = new Map<string, Recipient>(people.map((person) => [person.email, person]));
    if (onCall) recipients.set(onCall.email, onCall);
    const url = `${this.config.get('PUBLIC_URL', { infer: true })}/proposals/${id}`;
    for (const { name, email } of recipients.values())
      await this.outbox.enqueue(manager, {
        key: `${key} to ${email}`,
        to: email,
        subject,
        siteId,
        ...composeMail({
          greeting: `Good day ${name},`,
          paragraphs,
          link: { label: `Open proposal ${id}`, url },
          closing: SAFETY,
        }),
      });
  }
}
