import type { Rota } from './rota-api';

type Layer = Rota['layers'][number];

/** ISO 8601: Monday is 1, Sunday is 7. */
export const WEEKDAYS = ['Mon', 'Tue', 'Wed', 'Thu', 'Fri', 'Sat', 'Sun'] as const;

/** A layer in a line: "Office hours: Mon Tue Wed Thu Fri 08:00–17:00, hand-over at 06:00". */
export function layerWords({ name, weekdays, hours, handOverTime, endDate }: Layer): string {
  const days =
    weekdays.length === 7
      ? ''
      : [...weekdays]
          .sort()
          .map((day) => WEEKDAYS[day - 1])
          .join(' ');
  const when = [days, hours && `${hours.from}–${hours.to}`].filter(Boolean).join(' ');
  return `${name}: ${when ? `${when}, ` : ''}hand-over at ${handOverTime}${endDate ? `, until ${endDate}` : ''}`;
}
