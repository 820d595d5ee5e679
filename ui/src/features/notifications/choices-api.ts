import { queryOptions } from '@tanstack/react-query';
import { answer, client, type Schemas } from '../../api/client';
import { queryClient } from '../../api/query-client';

export type Choices = Schemas['ChoicesDto'];

export const choicesQuery = queryOptions({
  queryKey: ['notification-choices'],
  queryFn: () => answer(client.GET('/api/v1/notification-choices')),
});

async function changed<T>(request: Promise<T>): Promise<T> {
  const result = await request;
  await queryClient.invalidateQueries({ queryKey: choicesQuery.queryKey });
  return result;
}

export const setChoices = (body: Schemas['SetChoicesDto']) =>
  changed(answer(client.PUT('/api/v1/notification-choices', { body })));

/** Whether this browser can show push messages at all: it needs a service worker and a safe origin. */
export const pushPossible = (): boolean => 'serviceWorker' in navigator && 'PushManager' in window;

/** What this browser is called in the person's list. */
function browserName(): string {
  const agent = navigator.userAgent;
  const name = /Firefox\//.test(agent)
    ? 'Firefox'
    : /Edg\//.test(agent)
      ? 'Edge'
      : /Chrome\//.test(agent)
        ? 'Chrome'
        : /Safari\//.test(agent)
          ? 'Safari'
          : 'Browser';
  const system = /Android|iPhone|iPad|Windows|Mac OS|Linux/.exec(agent)?.[0];
  return system ? `${name} on ${system}` : name;
}

/** Asks the person's leave and registers this browser for push messages. */
export async function switchPushOn(pushKey: string): Promise<void> {
  if ((await Notification.requestPermission()) !== 'granted')
    throw new Error('The browser does not let this page show messages; allow it in its settings.');
  const worker = await navigator.serviceWorker.ready;
  const subscription = await worker.pushManager.subscribe({
    userVisibleOnly: true,
    applicationServerKey: pushKey,
  });
  const { keys } = subscription.toJSON();
  await changed(
    answer(
      client.POST('/api/v1/notification-choices/browsers', {
        body: {
          endpoint: subscription.endpoint,
          keys: { p256dh: keys!.p256dh!, auth: keys!.auth! },
          browser: browserName(),
        },
      }),
    ),
  );
}

/** Ends push messages to a browser; to this one also at the browser itself. */
export async function switchPushOff({ id, endpoint }: Choices['subscriptions'][number]): Promise<void> {
  await changed(
    answer(client.DELETE('/api/v1/notification-choices/browsers/{id}', { params: { path: { id } } })),
  );
  const worker = await navigator.serviceWorker?.getRegistration();
  const own = await worker?.pushManager?.getSubscription();
  if (own?.endpoint === endpoint) await own.unsubscribe();
}
