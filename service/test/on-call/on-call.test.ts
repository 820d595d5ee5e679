import request from 'supertest';
import { Like } from 'typeorm';
import { afterAll, beforeAll, beforeEach, describe, expect, it, vi } from 'vitest';
import { Alert, AlertEvent } from '../../src/alerts/alert.entity.js';
import { AlertWatch } from '../../src/alerts/alert-watch.service.js';
import { EscalationService } from '../../src/alerts/escalation.service.js';
import { Axis } from '../../src/fleet/axis.entity.js';
import { DigestService } from '../../src/on-call/digest.service.js';
import { AcknowledgeLink } from '../../src/notifications/acknowledge-link.entity.js';
import { Mail } from '../../src/notifications/mail.entity.js';
import { UserRole } from '../../src/people/user-role.entity.js';
import { User } from '../../src/people/user.entity.js';
import { RotaService } from '../../src/rota/rota.service.js';
import { startService, type Service } from '../support/start-service.js';

let service: Service;
let axis: Axis;
let person: User;
const alerts = () => service.dataSource.getRepository(Alert);

beforeAll(async () => {
  service = await startService();
  // The alerts here are put into the table: no beat may judge them by samples that there are none of.
  service.app.get(AlertWatch).lookAtAll = () => Promise.resolve();
  axis = await service.dataSource.getRepository(Axis).findOneByOrFail({ siteId: service.siteIds[0] });
});
afterAll(() => service.close());
beforeEach(async () => {
  for (const table of ['alert_event', 'alert', 'mail_outbox', 'acknowledge_link'])
    await service.dataSource.query(`DELETE FROM "${table}"`);
  // Each test has a person of its own on call: one who leaves is gone for good.
  person = await service.addPerson(`watch ${Math.random().toString(36).slice(2)}`.replace(' ', '-'), [
    { siteId: axis.siteId, role: 'technician' },
  ]);
  vi.spyOn(service.app.get(RotaService), 'onCall').mockResolvedValue({
    userId: person.id,
    name: person.name,
    email: person.email,
    until: new Date(Date.now() + 3_600_000),
  });
});

/** An alert that is due to be told, and what the mail about it says. */
async function toldAlert(): Promise<{ alert: Alert; mail: Mail; path: string }> {
  const alert = await alerts().save(
    alerts().create({
      siteId: axis.siteId,
      axisId: axis.id,
      rule: 'following-error',
      priority: 'high',
      state: 'unacknowledged',
      raisedAt: new Date(Date.now() - 60_000),
      acknowledgedAt: null,
      acknowledgedBy: null,
      returnedAt: null,
      value: 2,
      threshold: 1,
      message: 'It lags by 2 mm.',
      action: 'Look at it.',
      nextStepAt: new Date(Date.now() - 1_000),
    }),
  );
  await service.app.get(EscalationService).tellDue();
  const mail = await service.dataSource.getRepository(Mail).findOneByOrFail({ alertId: alert.id });
  const url = /http:\/\/polewright\.test\/acknowledge\/(\S+)/.exec(mail.text)!;
  return { alert, mail, path: `/api/v1/acknowledge/${url[1]}` };
}
const get = (path: string) => request(service.app.getHttpServer()).get(path);
const post = (path: string) => request(service.app.getHttpServer()).post(path);

describe('the link in an alert’s mail', () => {
  it('shows the alert and changes nothing, however often it is opened; then acknowledges once', async () => {
    const { alert, mail, path } = await toldAlert();
    expect(mail).toMatchObject({ to: person.email, siteId: axis.siteId });
    expect(mail.html).toContain('Acknowledge …');
    expect(mail.picture).toMatch(/^<svg .*<\/svg>$/);
    expect(mail.pictureText).toContain(`${axis.tag}: gain`);
    for (let i = 0; i < 3; i++) {
      const { body } = await get(path).expect(200);
      expect(body).toMatchObject({
        state: 'open',
        alertId: alert.id,
        person: person.name,
        axisTag: axis.tag,
        message: 'It lags by 2 mm.',
        acknowledgedBy: null,
      });
    }
    expect((await alerts().findOneByOrFail({ id: alert.id })).state).toBe('unacknowledged');
    const { body } = await post(path).expect(200);
    expect(body).toMatchObject({ state: 'used', acknowledgedBy: person.name });
    expect(await alerts().findOneByOrFail({ id: alert.id })).toMatchObject({
      state: 'acknowledged',
      acknowledgedBy: person.name,
      nextStepAt: null,
    });
    const events = await service.dataSource.getRepository(AlertEvent).findBy({ alertId: alert.id });
    expect(events.map(({ by, action }) => `${by} ${action}`)).toContain(`${person.name} acknowledged`);
    const second = await post(path).expect(410);
    expect(second.body.detail).toBe('This link was used already');
    expect((await get(path)).body).toMatchObject({ state: 'used', acknowledgedBy: person.name });
  });

  it('pressed twice at once acknowledges once', async () => {
    const { alert, path } = await toldAlert();
    const answers = await Promise.all([post(path), post(path), post(path)]);
    expect(answers.map(({ status }) => status).sort()[0]).toBe(200);
    expect(answers.filter(({ status }) => status === 200)).toHaveLength(1);
    const events = await service.dataSource
      .getRepository(AlertEvent)
      .findBy({ alertId: alert.id, action: 'acknowledged' });
    expect(events).toHaveLength(1);
  });

  it('expires, is for its alert alone, and cannot be made up', async () => {
    const { path } = await toldAlert();
    await service.dataSource
      .getRepository(AcknowledgeLink)
      .update({ userId: person.id }, { expiresAt: new Date(Date.now() - 1) });
    expect((await get(path)).body.state).toBe('expired');
    await post(path).expect(410);
    const [id, end, signature] = path.split('/').at(-1)!.split('.') as [string, string, string];
    const made = [
      `${id}1.${end}.${signature}`,
      `${id}.${end}1.${signature}`,
      `${id}.${end}.${signature.slice(0, -1)}A`,
      `${id}.${end}.`,
      'x',
      'a..b',
    ].filter((token) => token !== `${id}.${end}.${signature}`);
    for (const token of made) {
      await get(`/api/v1/acknowledge/${token}`).expect(404);
      await post(`/api/v1/acknowledge/${token}`).expect(404);
    }
  });

  it('is over when somebody else was first, or the alert has gone and come back', async () => {
    const { alert, path } = await toldAlert();
    await alerts().update(alert.id, { raisedAt: new Date() });
    expect((await get(path)).body.state).toBe('over');
    await post(path).expect(409);
    await alerts().update(alert.id, { raisedAt: alert.raisedAt });
    await (
      await service.as('technician')
    )
      .post(`/api/v1/alerts/${alert.id}/acknowledge`)
      .send({})
      .expect(200);
    expect((await get(path)).body).toMatchObject({ state: 'over', acknowledgedBy: 'Tomas Birkwell' });
    await post(path).expect(409);
  });

  it('is worth nothing to who has left, or may no longer acknowledge there', async () => {
    const { alert, path } = await toldAlert();
    await service.dataSource.getRepository(UserRole).update({ userId: person.id }, { role: 'viewer' });
    await post(path).expect(403);
    await service.dataSource.getRepository(User).update(person.id, { disabled: true });
    await post(path).expect(403);
    expect((await alerts().findOneByOrFail({ id: alert.id })).state).toBe('unacknowledged');
    // Refused, it is not used up.
    await service.dataSource.getRepository(User).update(person.id, { disabled: false });
    await service.dataSource.getRepository(UserRole).update({ userId: person.id }, { role: 'technician' });
    await post(path).expect(200);
  });
});

describe('the hand-over sheet', () => {
  it('has what stands, what changed and what was noted in the shift, for the people of the site', async () => {
    vi.restoreAllMocks();
    const { alert } = await toldAlert();
    const technician = await service.as('technician');
    const { id: _, ...rest } = alert;
    const over = await alerts().save(
      alerts().create({ ...rest, rule: 'output-activity', state: 'normal', nextStepAt: null }),
    );
    await technician
      .post(`/api/v1/axes/${axis.id}/maintenance`)
      .send({ on: true, reason: 'Grease' })
      .expect(200);
    await technician.post(`/api/v1/rota/${axis.siteId}/notes`).send({ text: 'Quiet night.' }).expect(201);
    const { body } = await technician.get(`/api/v1/on-call/hand-over/${axis.siteId}`).expect(200);
    expect(body.open).toMatchObject([{ id: alert.id, axisTag: axis.tag, state: 'unacknowledged' }]);
    expect(body.over).toMatchObject([{ id: over.id }]);
    expect(body.notes[0]).toMatchObject({ text: 'Quiet night.', by: 'Tomas Birkwell' });
    expect(body.changes).toContainEqual(
      expect.objectContaining({ by: 'Tomas Birkwell', subject: `axis ${axis.tag}`, note: 'Grease' }),
    );
    // As the rota has it: the begin of the shift, and who comes next.
    const rota = (await technician.get(`/api/v1/rota?siteId=${axis.siteId}`)).body;
    expect(body.from).toBe(rota.shifts[0].from);
    expect(body.onCall.userId).toBe(rota.shifts[0].userId);
    expect(body.next.userId).toBe(rota.shifts[1].userId);
    const soon = new Date(Date.now() - 1).toISOString();
    const later = await technician.get(`/api/v1/on-call/hand-over/${axis.siteId}?from=${soon}`).expect(200);
    expect(later.body).toMatchObject({ from: soon, notes: [], changes: [], over: [] });
    expect(later.body.open).toHaveLength(1);
    await technician.get(`/api/v1/on-call/hand-over/${axis.siteId}?from=2020-01-01T00:00:00Z`).expect(400);
    await technician.get('/api/v1/on-call/hand-over/999').expect(404);
  });
});

describe('the rates', () => {
  it('count what came, to whom, how often and how long it waited, beside the published figures', async () => {
    vi.restoreAllMocks();
    const { alert } = await toldAlert();
    await alerts().update(alert.id, { raisedAt: new Date(Date.now() - 30 * 3_600_000) });
    const events = service.dataSource.getRepository(AlertEvent);
    const at = (secondsAgo: number) => new Date(Date.now() - secondsAgo * 1000);
    // Twelve within a minute, each acknowledged 2 s later; one long ago, which nobody acknowledged.
    for (let i = 0; i < 12; i++)
      await events.save([
        { alertId: alert.id, by: 'service', action: 'raised', note: null, at: at(600 - 5 * i) },
        { alertId: alert.id, by: 'Wren', action: 'acknowledged', note: null, at: at(598 - 5 * i) },
      ]);
    await events.save({ alertId: alert.id, by: 'service', action: 'raised', note: null, at: at(86_400 * 3) });
    await events.save({ alertId: alert.id, by: 'service', action: 'raised', note: null, at: at(86_400 * 8) });
    const viewer = await service.as('viewer');
    const { body } = await viewer.get(`/api/v1/on-call/rates?siteId=${axis.siteId}&days=7`).expect(200);
    expect(body.alerts).toBe(13);
    expect(body.perDay).toBeCloseTo(13 / 7, 9);
    expect(body.days.reduce((sum: number, { alerts }: { alerts: number }) => sum + alerts, 0)).toBe(13);
    expect(body.floods).toMatchObject([{ alerts: 12 }]);
    expect(body.floodPct).toBeCloseTo((100 * 55) / (7 * 86_400), 2);
    expect(body.frequent).toEqual([
      expect.objectContaining({ axisTag: axis.tag, alerts: 13, sharePct: 100, chattering: true }),
    ]);
    expect(body.chattering).toHaveLength(1);
    expect(body.standing).toMatchObject([{ alertId: alert.id, state: 'unacknowledged' }]);
    expect(body.acknowledging[0]).toMatchObject({ priority: 'high', alerts: 13, unanswered: 1 });
    expect(body.acknowledging[0].medianSeconds).toBeCloseTo(2, 1);
    expect(body.people.reduce((sum: number, person: { alerts: number }) => sum + person.alerts, 0)).toBe(13);
    expect(
      body.people.reduce((sum: number, person: { hoursOnCall: number }) => sum + person.hoursOnCall, 0),
    ).toBeCloseTo(7 * 24, 3);
    expect(body.people[0]).toMatchObject({ load: 'acceptable' });
    expect(body.published).toMatchObject({ acceptablePerDay: 150, manageablePerDay: 300, floodAlerts: 10 });
    await viewer.get(`/api/v1/on-call/rates?siteId=${axis.siteId}&days=0`).expect(400);
    await viewer.get('/api/v1/on-call/rates?siteId=999').expect(404);
  });
});

describe('the morning’s digest', () => {
  it('goes once to the engineers of a site at seven on its clock, and to nobody who switched it off', async () => {
    vi.restoreAllMocks();
    await toldAlert();
    const digest = service.app.get(DigestService);
    const mails = () =>
      service.dataSource
        .getRepository(Mail)
        .find({ where: { key: Like(`digest ${axis.siteId} %`) }, order: { to: 'ASC' } });
    // A day on which the site is not new: London is an hour before UTC's eight in summer.
    const day = '2031-07-01T';
    await digest.sendDue(new Date(`${day}05:59:00Z`));
    expect(await mails()).toEqual([]);
    const users = service.dataSource.getRepository(User);
    await users.update({ email: 'saskia.thornby@tarnwick.example' }, { dailyDigest: false });
    await digest.sendDue(new Date(`${day}06:00:30Z`));
    await digest.sendDue(new Date(`${day}06:01:30Z`));
    const sent = await mails();
    expect(sent.map(({ to }) => to)).toEqual(['approver@tarnwick.example', 'engineer@tarnwick.example']);
    expect(sent[0]!.text).toContain('Alerts: 1 open');
    expect(sent[0]!.text).toContain(`${axis.tag}: following error beyond tolerance, unacknowledged`);
    await digest.sendDue(new Date('2031-07-02T12:00:00Z'));
    expect(await mails()).toHaveLength(2);
  });
});
