import type { EntityManager } from 'typeorm';
import { hashPassword } from '../auth/passwords.js';
import type { Role } from '../auth/policy.js';
import { HandoverNote } from '../rota/handover-note.entity.js';
import { RotaLayer } from '../rota/rota-layer.entity.js';
import { UserRole } from './user-role.entity.js';
import { User } from './user.entity.js';

export const DEMO_PASSWORD = 'polewright-demo';

const DAY = 24 * 3_600_000;

interface DemoPerson {
  email: string;
  name: string;
  role: Role;
}

/** The people of Tarnwick Tileworks, all invented. The first five are the demo's sign-ins. */
const PEOPLE: DemoPerson[] = [
  { email: 'viewer@tarnwick.example', name: 'Orla Fennick', role: 'viewer' },
  { email: 'technician@tarnwick.example', name: 'Tomas Birkwell', role: 'technician' },
  { email: 'engineer@tarnwick.example', name: 'Ines Harrowgate', role: 'engineer' },
  { email: 'approver@tarnwick.example', name: 'Marek Solvane', role: 'approver' },
  { email: 'admin@tarnwick.example', name: 'Judith Penhollow', role: 'administrator' },
  { email: 'wren.castellow@tarnwick.example', name: 'Wren Castellow', role: 'technician' },
  { email: 'idris.pellworth@tarnwick.example', name: 'Idris Pellworth', role: 'technician' },
  { email: 'saskia.thornby@tarnwick.example', name: 'Saskia Thornby', role: 'engineer' },
];

/** In the order of their turns. */
const ON_CALL = ['technician@', 'wren.castellow@', 'saskia.thornby@', 'idris.pellworth@'];

const NOTES = [
  {
    daysAgo: 4,
    by: 'idris.pellworth@',
    text: 'Quiet night. The glaze carriage was greased at 02:10 and ran stiffer for the first few moves, which is usual after greasing.',
  },
  {
    daysAgo: 2,
    by: 'technician@',
    text: 'New pallets on the transfer gantry since the early shift, heavier than the old ones. Keep an eye on its following error.',
  },
];

/** The demo's people, each with one role on every site given. */
export async function seedDemoPeople(manager: EntityManager, siteIds: number[]): Promise<void> {
  const passwordHash = await hashPassword(DEMO_PASSWORD);
  for (const { email, name, role } of PEOPLE) {
    const user = await manager.save(
      manager.create(User, { email, name, passwordHash, demo: true, lastSignInAt: null }),
    );
    await manager.insert(
      UserRole,
      siteIds.map((siteId) => ({ userId: user.id, siteId, role })),
    );
  }
}

/** A weekly rota for each site, four weeks old, and what the last ones on call wrote. Needs the demo's people. */
export async function seedDemoRota(
  manager: EntityManager,
  siteIds: number[],
  now: Date = new Date(),
): Promise<void> {
  const idOf = async (start: string) =>
    (await manager.findOneByOrFail(User, { email: `${start}tarnwick.example` })).id;
  const members = await Promise.all(ON_CALL.map(idOf));
  const monday = new Date(now.getTime() - ((now.getUTCDay() + 6) % 7) * DAY);
  const startDate = new Date(monday.getTime() - members.length * 7 * DAY).toISOString().slice(0, 10);
  for (const [index, siteId] of siteIds.entries()) {
    const first = index % members.length;
    const memberIds = [...members.slice(first), ...members.slice(0, first)];
    await manager.insert(RotaLayer, {
      siteId,
      name: 'Week by week',
      memberIds,
      handOverTime: '06:00',
      rotationDays: 7,
      startDate,
    });
    for (const { daysAgo, by, text } of NOTES)
      await manager.insert(HandoverNote, {
        siteId,
        at: new Date(now.getTime() - daysAgo * DAY),
        userId: await idOf(by),
        text,
      });
  }
}
