import { Button, Textarea } from '@mantine/core';
import { queryOptions, useMutation, useQuery } from '@tanstack/react-query';
import { useState } from 'react';
import { answer, client, type Schemas } from '../../api/client';
import { may } from '../../api/policy';
import { queryClient } from '../../api/query-client';
import { sitesQuery } from '../../api/sites';
import { useSession } from '../../api/use-session';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';

type Checklist = Schemas['SiteChecklistDto'];

const checklistQuery = (siteId: number) =>
  queryOptions({
    queryKey: ['checklist', siteId],
    queryFn: () => answer(client.GET('/api/v1/sites/{siteId}/checklist', { params: { path: { siteId } } })),
  });

/** What must be confirmed at the machine, site by site. */
export function Component() {
  const sites = useQuery(sitesQuery);
  return (
    <>
      <title>Checklists · Polewright</title>
      <h1>Checklists</h1>
      <p className="soft" style={{ margin: '6px 0 18px', maxWidth: 640 }}>
        What the person at the machine confirms, item by item, before gains are sent.
      </p>
      {sites.error && !sites.data ? (
        <ErrorState error={sites.error} what="The sites" onRetry={() => void sites.refetch()} />
      ) : !sites.data ? (
        <Waiting heights={[320]} />
      ) : (
        <div style={{ display: 'grid', gridTemplateColumns: 'minmax(0, 1fr)', gap: 18, maxWidth: 820 }}>
          {sites.data.items.map(({ id, name }) => (
            <SiteChecklist key={id} siteId={id} name={name} />
          ))}
        </div>
      )}
    </>
  );
}

function SiteChecklist({ siteId, name }: { siteId: number; name: string }) {
  const { user } = useSession();
  const { data, error, refetch } = useQuery(checklistQuery(siteId));
  if (error && !data)
    return <ErrorState error={error} what={`The checklist of ${name}`} onRetry={() => void refetch()} />;
  if (!data) return <Waiting heights={[320]} />;
  return (
    <Card title={name} sub={`${data.always.length} items hold on every site; ${data.own.length} of its own`}>
      <ol style={{ margin: 0, paddingLeft: 22 }}>
        {[...data.always, ...data.own].map(({ key, text }) => (
          <li key={key}>{text}</li>
        ))}
      </ol>
      {may(user, 'checklist.change', siteId) && (
        <OwnItems key={data.own.map(({ key }) => key).join()} name={name} checklist={data} />
      )}
    </Card>
  );
}

function OwnItems({ name, checklist: { siteId, own } }: { name: string; checklist: Checklist }) {
  const former = own.map(({ text }) => text).join('\n');
  const [text, setText] = useState(former);
  const save = useMutation({
    mutationFn: (items: string[]) =>
      answer(
        client.PUT('/api/v1/sites/{siteId}/checklist', { params: { path: { siteId } }, body: { items } }),
      ),
    onSuccess: (saved) => queryClient.setQueryData(['checklist', siteId], saved),
  });
  const items = text
    .split('\n')
    .map((line) => line.trim())
    .filter((line) => line.length > 0);
  return (
    <form
      style={{ marginTop: 16 }}
      onSubmit={(event) => {
        event.preventDefault();
        save.mutate(items);
      }}
    >
      <Textarea
        label={`Items that ${name} adds`}
        description="one a line; what holds on every site cannot be taken away"
        autosize
        minRows={2}
        value={text}
        onChange={(event) => setText(event.currentTarget.value)}
      />
      {save.error && (
        <p role="alert" style={{ color: 'var(--out)' }}>
          {save.error.message}
        </p>
      )}
      <Button
        type="submit"
        mt="sm"
        variant="outline"
        loading={save.isPending}
        disabled={items.join('\n') === former}
      >
        Save the checklist
      </Button>
    </form>
  );
}
