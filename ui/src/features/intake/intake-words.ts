import { significant } from '../../components/quantity';
import type { GatewayIntake, Intake } from './intake-api';

/** Clocks that differ by less than this, s, are not worth a word: messages take a moment. */
const CLOCK_NOTICE = 2;
/** The age of a newest sample, s, from which on it comes late: messages and checkpoints have beats of their own. */
const LATE = 5;

export const seconds = (value: number): string =>
  value < 1 ? `${Math.round(1000 * value)} ms` : `${significant(value)} s`;

export const bytes = (value: number): string =>
  value < 1e3
    ? `${value} B`
    : value < 1e6
      ? `${significant(value / 1e3)} kB`
      : `${significant(value / 1e6)} MB`;

export const perSecond = (value: number): string =>
  value >= 1e6
    ? `${significant(value / 1e6)} M`
    : value >= 1e4
      ? `${significant(value / 1e3)} k`
      : significant(value);

/** What the clock of a gateway looks like from here; null while nothing came for a minute. */
export function clockWords({ clockOffset }: GatewayIntake): string | null {
  if (clockOffset === null) return null;
  if (clockOffset > CLOCK_NOTICE) return `ahead by ${seconds(clockOffset)}`;
  if (clockOffset < -CLOCK_NOTICE) return `behind, or late, by ${seconds(-clockOffset)}`;
  return 'agrees';
}

/** What needs somebody, in sentences that stay as they are while figures move; none when the intake fares well. */
export function concerns({ gateways, lag, failedCheckpoints }: Intake): string[] {
  const found: string[] = [];
  if (failedCheckpoints > 0)
    found.push(
      `The last ${failedCheckpoints === 1 ? 'checkpoint' : `${failedCheckpoints} checkpoints`} could not be written. Nothing is lost yet: what came is in memory and in the gateways. See the service's log and the disk.`,
    );
  if (lag > 0.5) found.push('The service is behind: messages wait before they are taken.');
  const heard = gateways.filter(({ clockOffset }) => clockOffset !== null);
  const ahead = heard.filter(({ clockOffset }) => clockOffset! > CLOCK_NOTICE);
  if (ahead.length > 1 && ahead.length === heard.length)
    found.push(
      `All gateways' clocks are ahead of this computer's. Look at this computer's clock first; samples more than five minutes ahead are refused.`,
    );
  else
    for (const gateway of ahead)
      found.push(
        `The clock of ${gateway.name} is ahead by ${Math.round(gateway.clockOffset!)} s; set it by NTP. Samples more than five minutes ahead are refused.`,
      );
  for (const { name, via, lag: age } of gateways)
    if (via !== null && age !== null && age > LATE) found.push(`The samples of ${name} come late.`);
  for (const { name, keepEveryMs } of gateways)
    if (keepEveryMs > 0) found.push(`${name} was asked to send only every ${seconds(keepEveryMs / 1000)}.`);
  return found;
}
