import 'reflect-metadata';
import { Global, Module, type INestApplication } from '@nestjs/common';
import { ConfigModule } from '@nestjs/config';
import { APP_GUARD } from '@nestjs/core';
import { EventEmitterModule } from '@nestjs/event-emitter';
import { ScheduleModule } from '@nestjs/schedule';
import { Test } from '@nestjs/testing';
import { ThrottlerGuard, ThrottlerModule } from '@nestjs/throttler';
import { TypeOrmModule } from '@nestjs/typeorm';
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import request from 'supertest';
import { DataSource } from 'typeorm';
import { AuditModule } from '../../src/audit/audit.module.js';
import { AuthModule } from '../../src/auth/auth.module.js';
import { dataSourceOptions } from '../../src/database/data-source.js';
import { Transactions } from '../../src/database/transactions.js';
import { Site } from '../../src/fleet/site.entity.js';
import { NotificationsModule } from '../../src/notifications/notifications.module.js';
import { DEMO_PASSWORD, seedDemoPeople, seedDemoRota } from '../../src/people/demo-people.js';
import { PeopleModule } from '../../src/people/people.module.js';
import { UserRole } from '../../src/people/user-role.entity.js';
import { User } from '../../src/people/user.entity.js';
import { RotaModule } from '../../src/rota/rota.module.js';
import type { Settings } from '../../src/settings.js';
import { setup } from '../../src/setup.js';

@Global()
@Module({ providers: [Transactions], exports: [Transactions] })
class TransactionsModule {}

export interface PeopleApp {
  app: INestApplication;
  dataSource: DataSource;
  settings: Settings;
  /** Tile Hall and Kiln Yard. */
  siteIds: [number, number];
  /** A request with the access token of one of the demo's people, by the start of their address. */
  as: (who: string) => Promise<ReturnType<typeof request.agent>>;
  close: () => Promise<void>;
}

/** People, sign-in, record, rota and mail over a real database file, with the demo's people on two sites. */
export async function startPeople(
  changed: Partial<Settings> = {},
  { seed = true, schedule = false } = {},
): Promise<PeopleApp> {
  const folder = mkdtempSync(join(tmpdir(), 'polewright-people-'));
  const settings: Settings = {
    PORT: 0,
    HOST: '127.0.0.1',
    DATA_DIR: folder,
    DATABASE: join(folder, 'test.sqlite'),
    DEMO: true,
    PUBLIC_URL: 'http://polewright.test',
    SMTP_URL: 'smtp://127.0.0.1:1',
    MAIL_FROM: 'Polewright <polewright@tarnwick.example>',
    MAIL_INBOX_URL: null,
    JWT_SECRET: 'a secret of this test only',
    SMS: null,
    ...changed,
  };
  const module = await Test.createTestingModule({
    imports: [
      ConfigModule.forRoot({
        isGlobal: true,
        ignoreEnvFile: true,
        ignoreEnvVars: true,
        load: [() => settings],
      }),
      EventEmitterModule.forRoot(),
      // Without it a test decides itself when the outbox is worked.
      ...(schedule ? [ScheduleModule.forRoot()] : []),
      ThrottlerModule.forRoot({ throttlers: [{ ttl: 60_000, limit: 1_200 }] }),
      TypeOrmModule.forRoot(dataSourceOptions(settings.DATABASE)),
      TransactionsModule,
      AuditModule,
      AuthModule,
      PeopleModule,
      RotaModule,
      NotificationsModule,
    ],
    providers: [{ provide: APP_GUARD, useClass: ThrottlerGuard }],
  }).compile();
  const app = module.createNestApplication({ logger: ['fatal'] });
  setup(app);
  await app.listen(0, '127.0.0.1');
  const dataSource = app.get(DataSource);
  const [hall, yard] = await dataSource.getRepository(Site).save([
    { name: 'Tile Hall', timeZone: 'Europe/London' },
    { name: 'Kiln Yard', timeZone: 'America/New_York' },
  ]);
  const siteIds: [number, number] = [hall!.id, yard!.id];
  if (seed) {
    await seedDemoPeople(dataSource.manager, siteIds);
    await seedDemoRota(dataSource.manager, siteIds);
  }
  return {
    app,
    dataSource,
    settings,
    siteIds,
    as: async (who) => {
      const agent = request.agent(app.getHttpServer());
      const { body } = await agent
        .post('/api/v1/auth/sign-in')
        .send({ email: `${who}@tarnwick.example`, password: DEMO_PASSWORD })
        .expect(200);
      return agent.set('Authorization', `Bearer ${(body as { accessToken: string }).accessToken}`);
    },
    close: async () => {
      await app.close();
      rmSync(folder, { recursive: true, force: true });
    },
  };
}

/** A person with roles of the test's choosing, who signs in with the demo's password. */
export async function addPerson(
  { dataSource }: PeopleApp,
  start: string,
  roles: { siteId: number; role: UserRole['role'] }[],
): Promise<User> {
  const { passwordHash } = await dataSource.getRepository(User).findOneByOrFail({});
  const user = await dataSource.getRepository(User).save({
    name: start,
    email: `${start}@tarnwick.example`,
    passwordHash,
    lastSignInAt: null,
  });
  await dataSource.getRepository(UserRole).insert(roles.map((role) => ({ userId: user.id, ...role })));
  return user;
}
