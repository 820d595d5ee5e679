import { BadRequestException, Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import { Between, In, Not, type DataSource } from 'typeorm';
import { Alert, PRIORITIES } from '../alerts/alert.entity.js';
import { RULE_TITLES } from '../alerts/rules.js';
import { AuditEntry } from '../audit/audit-entry.entity.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { Axis } from '../fleet/axis.entity.js';
import { HandoverNote } from '../rota/handover-note.entity.js';
import { RotaService } from '../rota/rota.service.js';
import { Proposal } from '../proposals/proposal.entity.js';
import type { HandOverAlertDto, HandOverChangeDto, HandOverDto } from './dto/hand-over.dto.js';

const HOUR = 3_600_000;
/** Where nobody is on call, or since long, the sheet goes back so far, ms. */
const USUAL = 12 * HOUR;
const LONGEST = 14 * 24 * HOUR;
/** Changes that a sheet lists. */
const MOST_CHANGES = 200;
/** Changes to these say what the next person has to know; those to people and mails do not. */
const SUBJECTS = ['axis', 'proposal', 'rota', 'alert-rule', 'capture', 'gateway'];

/** What the person on call hands over: what stands, what changed, what was noted. */
@Injectable()
export class HandOverService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly rota: RotaService,
  ) {}

  /** @param since begin of the sheet's time; without it the begin of the present shift */
  async sheet(user: SignedInUser, siteId: number, since: Date | null, now: Date): Promise<HandOverDto> {
    const { site, onCall, shifts } = await this.rota.view(user, siteId, now);
    const begun = onCall && shifts[0] && shifts[0].from <= now ? shifts[0].from : null;
    const from = since ?? begun ?? new Date(now.getTime() - USUAL);
    const age = now.getTime() - from.getTime();
    if (age < 0 || age > LONGEST)
      throw new BadRequestException({ errors: [{ path: 'from', message: 'must lie in the last 14 days' }] });
    const next = onCall && (await this.rota.onCall(siteId, onCall.until));
    const { manager } = this.dataSource;
    const relations = { axis: true };
    const open = await manager.find(Alert, { where: { siteId, state: Not('normal') }, relations });
    const over = await manager.find(Alert, {
      where: { siteId, state: 'normal', raisedAt: Between(from, now) },
      relations,
      order: { raisedAt: 'DESC' },
    });
    const axes = await manager.find(Axis, {
      where: { siteId, state: Not('in-tune') },
      order: { tag: 'ASC' },
    });
    const notes = await manager.find(HandoverNote, {
      where: { siteId, at: Between(from, now) },
      relations: { user: true },
      order: { id: 'DESC' },
    });
    const dtoOf = (person: typeof onCall) => person && { ...person, until: person.until.toISOString() };
    return {
      siteId,
      siteName: site.name,
      timeZone: site.timeZone,
      from: from.toISOString(),
      to: now.toISOString(),
      onCall: dtoOf(onCall),
      next: dtoOf(next),
      open: open.sort(byUrgency).map(alertOf),
      over: over.map(alertOf),
      axes: axes.map(({ id, tag, name, state, stateReason }) => ({ id, tag, name, state, stateReason })),
      changes: await this.changes(siteId, from, now),
      notes: notes.map(({ id, at, user: by, text }) => ({ id, at: at.toISOString(), by: by.name, text })),
    };
  }

  private async changes(siteId: number, from: Date, to: Date): Promise<HandOverChangeDto[]> {
    const { manager } = this.dataSource;
    const entries = await manager.find(AuditEntry, {
      where: { siteId, at: Between(from, to), subjectType: In(SUBJECTS) },
      order: { id: 'DESC' },
      take: MOST_CHANGES,
    });
    const idsOf = (type: string): number[] =>
      entries.filter(({ subjectType }) => subjectType === type).map(({ subjectId }) => Number(subjectId));
    const proposals = await manager.find(Proposal, {
      select: { id: true, axisId: true },
      where: { id: In(idsOf('proposal')) },
    });
    const axisOfProposal = new Map(proposals.map(({ id, axisId }) => [id, axisId]));
    const axes = await manager.find(Axis, {
      select: { id: true, tag: true },
      where: { id: In([...idsOf('axis'), ...axisOfProposal.values()]) },
    });
    const tags = new Map(axes.map(({ id, tag }) => [id, tag]));
    return entries.map(({ at, actor, action, subjectType, subjectId, note }) => {
      const axisId = subjectType === 'axis' ? Number(subjectId) : axisOfProposal.get(Number(subjectId));
      const tag = ['axis', 'proposal'].includes(subjectType) && axisId !== undefined && tags.get(axisId);
      return {
        at: at.toISOString(),
        by: actor,
        action,
        subject:
          subjectType === 'axis'
            ? `axis ${tag || subjectId}`
            : `${subjectType} ${subjectId}${tag ? ` of ${tag}` : ''}`,
        note,
      };
    });
  }
}

const byUrgency = (a: Alert, b: Alert): number =>
  Number(b.state === 'unacknowledged') - Number(a.state === 'unacknowledged') ||
  PRIORITIES.indexOf(a.priority) - PRIORITIES.indexOf(b.priority) ||
  a.raisedAt.getTime() - b.raisedAt.getTime();

const alertOf = (alert: Alert): HandOverAlertDto => ({
  id: alert.id,
  axisTag: alert.axis.tag,
  title: RULE_TITLES[alert.rule],
  priority: alert.priority,
  state: alert.state,
  raisedAt: alert.raisedAt.toISOString(),
  message: alert.message,
  action: alert.action,
  acknowledgedBy: alert.acknowledgedBy,
  shelvedUntil: alert.shelvedUntil?.toISOString() ?? null,
  shelveReason: alert.shelveReason,
});
