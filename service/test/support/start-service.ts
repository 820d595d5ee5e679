import 'reflect-metadata';
import type { INestApplication } from '@nestjs/common';
import { NestFactory } from '@nestjs/core';
import { mkdtempSync, renameSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import request from 'supertest';
import { DataSource } from 'typeorm';
import { AppModule } from '../../src/app.module.js';
import { DEMO_PASSWORD } from '../../src/people/demo-people.js';
import { UserRole } from '../../src/people/user-role.entity.js';
import { User } from '../../src/people/user.entity.js';
import { readSettings } from '../../src/settings.js';
import { setup } from '../../src/setup.js';

export { DEMO_PASSWORD };
export { until } from './until.js';

/** Requests with the access token of one person. */
export type Caller = ReturnType<typeof request.agent>;

/** The whole service on a port of its own, over a database file of its own. */
export interface Service {
  app: INestApplication;
  url: string;
  dataSource: DataSource;
  /** Tile Hall and Kiln Yard. */
  siteIds: [number, number];
  /** By the start of the address: "engineer" is engineer@tarnwick.example. One sign-in per person. */
  as: (who: string) => Promise<Caller>;
  /** A further person, who signs in with the demo's password. */
  addPerson: (who: string, roles: { siteId: number; role: UserRole['role'] }[]) => Promise<User>;
  /** Value of one line of /metrics, such as `polewright_frames_total{outcome="taken"}`; 0 while it is absent. */
  metric: (line: string) => Promise<number>;
  close: () => Promise<void>;
}

/** An agent that carries an access token with every request. */
export async function signIn(target: Parameters<typeof request.agent>[0], who: string): Promise<Caller> {
  const agent = request.agent(target);
  const { body } = await agent
    .post('/api/v1/auth/sign-in')
    .send({ email: `${who}@tarnwick.example`, password: DEMO_PASSWORD })
    .expect(200);
  return agent.set('Authorization', `Bearer ${(body as { accessToken: string }).accessToken}`);
}

export const temporaryFolder = (): string => mkdtempSync(join(tmpdir(), 'polewright-service-'));

/**
 * Starts the service as `main.ts` does, with the demo's works and people but without its simulator.
 *
 * @param over a database file that it is started over, as after a crash; it is taken away at the end
 */
export async function startService(over?: string): Promise<Service> {
  const folder = temporaryFolder();
  if (over) renameSync(over, join(folder, 'polewright.sqlite'));
  const settings = readSettings({
    PORT: '0',
    DATA_DIR: folder,
    DEMO: '1',
    SMTP_URL: 'smtp://127.0.0.1:1',
    PUBLIC_URL: 'http://polewright.test',
  });
  const app = await NestFactory.create(AppModule.with(settings), { logger: ['fatal'] });
  setup(app);
  await app.listen(settings.PORT, settings.HOST);
  const dataSource = app.get(DataSource);
  const sites = (await dataSource.query(`SELECT "id" FROM "site" ORDER BY "id"`)) as { id: number }[];
  const callers = new Map<string, Promise<Caller>>();
  return {
    app,
    url: await app.getUrl(),
    dataSource,
    siteIds: [sites[0]!.id, sites[1]!.id],
    as: (who) => {
      const caller = callers.get(who) ?? signIn(app.getHttpServer() as never, who);
      callers.set(who, caller);
      return caller;
    },
    addPerson: async (who, roles) => {
      const { passwordHash } = await dataSource
        .getRepository(User)
        .findOneByOrFail({ email: 'viewer@tarnwick.example' });
      const user = await dataSource.getRepository(User).save({
        name: who,
        email: `${who}@tarnwick.example`,
        passwordHash,
        lastSignInAt: null,
      });
      await dataSource.getRepository(UserRole).insert(roles.map((role) => ({ userId: user.id, ...role })));
      return user;
    },
    metric: async (line) => {
      const { text } = await request(app.getHttpServer() as never)
        .get('/metrics')
        .expect(200);
      const found = text.split('\n').find((row) => row.startsWith(`${line} `));
      return found === undefined ? 0 : Number(found.slice(line.length + 1));
    },
    close: async () => {
      await app.close();
      rmSync(folder, { recursive: true, force: true });
    },
  };
}
