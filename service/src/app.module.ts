import { Module, type DynamicModule } from '@nestjs/common';
import { ConfigModule } from '@nestjs/config';
import { APP_GUARD } from '@nestjs/core';
import { EventEmitterModule } from '@nestjs/event-emitter';
import { ScheduleModule } from '@nestjs/schedule';
import { ServeStaticModule } from '@nestjs/serve-static';
import { ThrottlerGuard, ThrottlerModule } from '@nestjs/throttler';
import { fileURLToPath } from 'node:url';
import { AlertsModule } from './alerts/alerts.module.js';
import { AuditModule } from './audit/audit.module.js';
import { AuthModule } from './auth/auth.module.js';
import { CapturesModule } from './captures/captures.module.js';
import { DatabaseModule } from './database/database.module.js';
import { DemoModule } from './demo/demo.module.js';
import { DesignModule } from './design/design.module.js';
import { FleetModule } from './fleet/fleet.module.js';
import { HealthModule } from './health/health.module.js';
import { IndicatorsModule } from './indicators/indicators.module.js';
import { LiveModule } from './live/live.module.js';
import { NotificationsModule } from './notifications/notifications.module.js';
import { OnCallModule } from './on-call/on-call.module.js';
import { PeopleModule } from './people/people.module.js';
import { ProposalsModule } from './proposals/proposals.module.js';
import { RotaModule } from './rota/rota.module.js';
import type { Settings } from './settings.js';
import { StorageModule } from './storage/storage.module.js';
import { TelemetryModule } from './telemetry/telemetry.module.js';

/** Requests a minute from one address. */
const REQUEST_LIMIT = 1_200;

@Module({})
export class AppModule {
  static with(settings: Settings): DynamicModule {
    return {
      module: AppModule,
      imports: [
        ConfigModule.forRoot({
          isGlobal: true,
          ignoreEnvFile: true,
          ignoreEnvVars: true,
          load: [() => settings],
        }),
        EventEmitterModule.forRoot(),
        ScheduleModule.forRoot(),
        // Gateways send thousands of messages; the intake has its own limits.
        ThrottlerModule.forRoot({
          throttlers: [{ ttl: 60_000, limit: REQUEST_LIMIT }],
          skipIf: (context) => context.getType() === 'ws',
        }),
        ServeStaticModule.forRoot({
          rootPath: fileURLToPath(new URL('../../ui/dist', import.meta.url)),
          exclude: ['/api/{*path}', '/socket.io/{*path}', '/assets/{*path}', '/health/{*path}', '/metrics'],
        }),
        DatabaseModule,
        AuditModule,
        AuthModule,
        PeopleModule,
        FleetModule,
        IndicatorsModule,
        TelemetryModule,
        AlertsModule,
        CapturesModule,
        ProposalsModule,
        RotaModule,
        NotificationsModule,
        OnCallModule,
        LiveModule,
        DesignModule,
        HealthModule,
        StorageModule,
        ...(settings.DEMO ? [DemoModule] : []),
      ],
      providers: [{ provide: APP_GUARD, useClass: ThrottlerGuard }],
    };
  }
}
