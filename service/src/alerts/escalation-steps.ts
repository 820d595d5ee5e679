import dayjs from 'dayjs';
import timezone from 'dayjs/plugin/timezone.js';
import utc from 'dayjs/plugin/utc.js';
import type { Priority } from './alert.entity.js';

dayjs.extend(utc);
dayjs.extend(timezone);

/** Whom a step tells. */
export type Audience = 'on call' | 'on call and fallback';

export interface EscalationStep {
  /** s after the step before it */
  after: number;
  to: Audience;
}

/** What follows when nobody acknowledges after the first mail, by priority (ours, no source). */
export const LATER_STEPS: Record<Priority, readonly EscalationStep[]> = {
  high: [
    { after: 120, to: 'on call' },
    { after: 240, to: 'on call and fallback' },
    { after: 480, to: 'on call and fallback' },
    { after: 960, to: 'on call and fallback' },
  ],
  medium: [
    { after: 600, to: 'on call' },
    { after: 1_800, to: 'on call and fallback' },
    { after: 3_600, to: 'on call and fallback' },
  ],
  low: [{ after: 3_600, to: 'on call' }],
};

/** On the site's clock nobody is told about an alert of low priority in between (ours, no source). */
const QUIET_FROM = '22:00';
const QUIET_TO = '06:00';

/** When the quiet hours end that `at` lies in; null when it lies in none. */
export function quietUntil(at: Date, zone: string): Date | null {
  const local = dayjs(at).tz(zone);
  const time = local.format('HH:mm');
  if (time >= QUIET_TO && time < QUIET_FROM) return null;
  const day = time < QUIET_TO ? local : local.add(1, 'day');
  return dayjs.tz(`${day.format('YYYY-MM-DD')}T${QUIET_TO}`, zone).toDate();
}
