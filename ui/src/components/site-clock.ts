import dayjs, { type Dayjs } from 'dayjs';
import relativeTime from 'dayjs/plugin/relativeTime';
import timezone from 'dayjs/plugin/timezone';
import utc from 'dayjs/plugin/utc';

dayjs.extend(utc);
dayjs.extend(timezone);
dayjs.extend(relativeTime);

/** A time as the clocks of a site show it. */
export const onSite = (at: string | number | Date, timeZone: string): Dayjs => dayjs(at).tz(timeZone);
