import { useSyncExternalStore } from 'react';
import { onSite } from './site-clock';

let now = Date.now();
function everyTenSeconds(listener: () => void): () => void {
  const timer = setInterval(() => {
    now = Date.now();
    listener();
  }, 10_000);
  return () => clearInterval(timer);
}

/** A time on the site's own clock; the exact one on hover. `relative` says how long ago and keeps counting. */
export function SiteTime({
  at,
  timeZone,
  relative = false,
}: {
  at: string | Date;
  timeZone: string;
  relative?: boolean;
}) {
  const present = useSyncExternalStore(everyTenSeconds, () => now);
  const local = onSite(at, timeZone);
  const today = local.isSame(onSite(present, timeZone), 'day');
  return (
    <time
      dateTime={new Date(at).toISOString()}
      title={`${local.format('ddd D MMM YYYY, HH:mm:ss')} (${timeZone})`}
    >
      {relative
        ? local.from(Math.max(present, local.valueOf()))
        : local.format(today ? 'HH:mm' : 'D MMM, HH:mm')}
    </time>
  );
}
