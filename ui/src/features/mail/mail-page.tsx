import { may } from '../../api/policy';
import { useSession } from '../../api/use-session';
import { DemoInbox } from './demo-inbox';
import { Outbox } from './outbox';

export function Component() {
  const { user } = useSession();
  return (
    <>
      <title>Mail · Polewright</title>
      <h1 style={{ marginBottom: 18 }}>Mail</h1>
      <div style={{ display: 'grid', gridTemplateColumns: 'minmax(0, 1fr)', gap: 20 }}>
        {may(user, 'people.manage') && <Outbox />}
        <DemoInbox />
      </div>
    </>
  );
}
