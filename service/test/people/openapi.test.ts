import request from 'supertest';
import { expect, test } from 'vitest';
import { startPeople } from './people-app.js';

interface Operation {
  responses: Record<string, { content?: Record<string, { schema?: { $ref?: string } }> }>;
  security?: unknown[];
}

/** What may be called without an access token. */
const OPEN = [
  'post /api/v1/auth/sign-in',
  'post /api/v1/auth/refresh',
  'post /api/v1/auth/sign-out',
  'post /api/v1/auth/password-reset',
  'get /api/v1/invitations/{token}',
  'post /api/v1/invitations/{token}/accept',
  'get /api/v1/calendar/{token}.ics',
];

test('the OpenAPI document names the shape of every answer and which operations ask for a token', async () => {
  const { app, close } = await startPeople({}, { seed: false });
  const { body } = await request(app.getHttpServer()).get('/api/v1/openapi.json').expect(200);
  const operations = Object.entries(body.paths as Record<string, Record<string, Operation>>).flatMap(
    ([path, methods]) =>
      Object.entries(methods).map(([method, operation]) => ({ name: `${method} ${path}`, operation })),
  );
  expect(operations.length).toBeGreaterThanOrEqual(20);
  const shapeless = operations.filter(({ operation: { responses } }) => {
    if (responses['204']) return false;
    const { 'application/json': json, ...others } = (responses['200'] ?? responses['201'])?.content ?? {};
    // A file has a media type of its own and no shape in JSON.
    return json ? !json.schema?.$ref : !Object.values(others).some(({ schema }) => schema);
  });
  expect(shapeless.map(({ name }) => name)).toEqual([]);
  const open = operations.filter(({ operation }) => !operation.security).map(({ name }) => name);
  expect(open.sort()).toEqual([...OPEN].sort());
  for (const { name } of operations) {
    if (OPEN.includes(name)) continue;
    const [method, path] = name.split(' ') as ['get' | 'post' | 'put' | 'patch' | 'delete', string];
    const client = request(app.getHttpServer());
    await client[method](path.replaceAll(/\{\w+\}/g, '1')).expect(401);
  }
  await close();
});
