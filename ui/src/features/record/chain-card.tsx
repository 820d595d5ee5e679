import { Button } from '@mantine/core';
import { useMutation } from '@tanstack/react-query';
import { Card } from '../../components/card';
import { checkRecord, type ChainReport } from './record-api';
import classes from './record.module.css';

/** Walks the record's chain of hashes and says whether it holds, or where it does not. */
export function ChainCard() {
  const check = useMutation({ mutationFn: checkRecord });
  return (
    <Card
      title="Is the record whole?"
      sub="each entry carries the SHA-256 of the one before; alteration and deletion are refused by the database"
    >
      <Button variant="outline" loading={check.isPending} onClick={() => check.mutate()}>
        Check every entry
      </Button>
      <div role="status">
        {check.data && <Verdict report={check.data} />}
        {check.error && <p style={{ color: 'var(--out)' }}>{check.error.message}</p>}
      </div>
    </Card>
  );
}

function Verdict({ report }: { report: ChainReport }) {
  const { entries, intact, brokenAt, reason, broken, head } = report;
  return (
    <div className={`${classes.verdict} ${intact ? '' : classes.broken}`}>
      {intact ? (
        <b>The record is whole: {entries} entries, each follows from the one before.</b>
      ) : (
        <>
          <b>
            The record is broken at entry {brokenAt}: {reason}.
          </b>
          <p style={{ margin: '6px 0' }}>
            {broken &&
              `It reads now: ${broken.at}, ${broken.actor}, ${broken.action}, ${broken.subjectType} ${broken.subjectId}. `}
            The {entries} entries before it hold. Nothing from it on can be trusted: keep a copy of the
            database file, and find out who could write to it.
          </p>
        </>
      )}
      <div className="soft small">
        Hash of the last good entry: <code>{head}</code>. Noted elsewhere, it shows later whether the whole
        record was made anew.
      </div>
    </div>
  );
}
