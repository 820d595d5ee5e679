import { useQuery } from '@tanstack/react-query';
import { may } from '../../api/policy';
import { sitesQuery } from '../../api/sites';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { EmptyState, ErrorState, Waiting } from '../../components/notices';
import { ScrollX } from '../../components/scroll-x';
import { InviteForm } from './invite-form';
import { OpenInvitations } from './open-invitations';
import { peopleQuery } from './people-api';
import classes from './people.module.css';
import { PersonRow } from './person-row';

export function Component() {
  const { user } = useSession();
  return (
    <>
      <title>People · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>People</h1>
      {may(user, 'people.manage') ? (
        <People />
      ) : (
        <EmptyState title="Only administrators manage people">Ask an administrator of your site.</EmptyState>
      )}
    </>
  );
}

function People() {
  const { user } = useSession();
  const people = useQuery(peopleQuery);
  const sites = useQuery(sitesQuery);
  const error = people.error ?? sites.error;
  if (error && !(people.data && sites.data))
    return (
      <ErrorState
        error={error}
        what="The people"
        onRetry={() => {
          void people.refetch();
          void sites.refetch();
        }}
      />
    );
  if (!people.data || !sites.data) return <Waiting heights={[320]} />;
  const own = sites.data.items.filter(({ id }) => may(user, 'people.manage', id));
  const count = people.data.items.length;
  return (
    <div className={classes.columns}>
      <div className={classes.list}>
        <Card title={count === 1 ? '1 person' : `${count} people`} sub="one role per person and site">
          <ScrollX label="People and their roles">
            <table className="plain-table left">
              <thead>
                <tr>
                  <th>Name</th>
                  <th>Mail address</th>
                  {own.map(({ id, name }) => (
                    <th key={id}>{name}</th>
                  ))}
                  <th>Last sign-in</th>
                  <th>Account</th>
                </tr>
              </thead>
              <tbody>
                {people.data.items.map((person) => (
                  <PersonRow key={person.id} person={person} sites={own} />
                ))}
              </tbody>
            </table>
          </ScrollX>
        </Card>
      </div>
      <div className={classes.aside}>
        <InviteForm sites={own} />
        <OpenInvitations sites={own} />
      </div>
    </div>
  );
}
