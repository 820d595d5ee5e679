import type { Person } from '../people/people-api';
import type { Rota } from './rota-api';

/** Whether a person can be on call on a site: signs in, and may acknowledge alerts there. */
const mayBeOnCall = ({ roles, disabled }: Person, siteId: number): boolean =>
  !disabled &&
  roles.some((entry) => entry.siteId === siteId && !['viewer', 'administrator'].includes(entry.role));

/** Those who can be chosen for a site's rota: who takes turns already, and who else may, if the reader sees them. */
export function onCallChoices(
  { layer, siteId }: Rota,
  people: readonly Person[],
): { value: string; label: string }[] {
  const names = new Map(layer?.members.map(({ userId, name }) => [userId, name]) ?? []);
  for (const person of people) if (mayBeOnCall(person, siteId)) names.set(person.id, person.name);
  return [...names].map(([id, name]) => ({ value: String(id), label: name }));
}
