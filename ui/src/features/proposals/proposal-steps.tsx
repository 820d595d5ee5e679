import { SiteTime } from '../../components/site-time';
import type { Proposal } from './proposals-api';
import classes from './proposal-page.module.css';

const STAGES: { label: string; state: Proposal['state']; done: readonly string[] }[] = [
  { label: 'Drafted', state: 'drafted', done: ['drafted'] },
  { label: 'In review', state: 'in review', done: ['sent for review'] },
  { label: 'Approved', state: 'approved', done: ['approved'] },
  { label: 'Scheduled', state: 'scheduled', done: ['scheduled'] },
  { label: 'Applied', state: 'applying', done: ['applied'] },
  { label: 'On trial', state: 'on trial', done: ['applied'] },
  { label: 'Kept or rolled back', state: 'kept', done: ['kept', 'rolled back'] },
];

const NOW: Partial<Record<Proposal['state'], number>> = {
  drafted: 0,
  'in review': 1,
  approved: 2,
  scheduled: 3,
  applying: 4,
  'on trial': 5,
  kept: 6,
  'rolled back': 6,
};

/** One line of named stages with who and when. */
export function ProposalSteps({ proposal }: { proposal: Proposal }) {
  const { state, events, timeZone } = proposal;
  const now = NOW[state] ?? -1;
  return (
    <>
      <ol className={classes.steps}>
        {STAGES.map(({ label, done }, i) => {
          const event =
            i <= now || now < 0 ? events.filter(({ action }) => done.includes(action)).at(-1) : undefined;
          const kind = i === now ? 'now' : i < now || (now < 0 && event) ? 'done' : '';
          return (
            <li
              key={label}
              className={kind ? classes[kind] : ''}
              {...(kind === 'now' && { 'aria-current': 'step' })}
            >
              {label}
              {event && (
                <small>
                  <SiteTime at={event.at} timeZone={timeZone} />, {event.by}
                </small>
              )}
            </li>
          );
        })}
      </ol>
      {now < 0 && (
        <p role="status" style={{ margin: '-8px 0 18px', fontWeight: 600 }}>
          This proposal is {state}. {events.at(-1)?.note}
        </p>
      )}
    </>
  );
}
