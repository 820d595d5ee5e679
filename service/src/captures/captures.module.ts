import { Module } from '@nestjs/common';
import { MulterModule } from '@nestjs/platform-express';
import { diskStorage } from 'multer';
import { randomUUID } from 'node:crypto';
import { FleetModule } from '../fleet/fleet.module.js';
import { StorageModule } from '../storage/storage.module.js';
import { TelemetryModule } from '../telemetry/telemetry.module.js';
import { CaptureFiles } from './capture-files.js';
import { CaptureQueue } from './capture-queue.service.js';
import { CaptureRetention } from './capture-retention.service.js';
import { CapturesController } from './captures.controller.js';
import { CapturesService } from './captures.service.js';
import { LiveCaptures } from './live-captures.service.js';

const LARGEST_FILE = 200 * 1024 * 1024;

@Module({ providers: [CaptureFiles], exports: [CaptureFiles] })
class CaptureFilesModule {}

@Module({
  imports: [
    FleetModule,
    TelemetryModule,
    StorageModule,
    CaptureFilesModule,
    MulterModule.registerAsync({
      imports: [CaptureFilesModule],
      inject: [CaptureFiles],
      useFactory: (files: CaptureFiles) => ({
        storage: diskStorage({
          destination: files.incoming,
          filename: (_request, _file, done) => done(null, randomUUID()),
        }),
        limits: { fileSize: LARGEST_FILE, files: 1, fields: 10, fieldSize: 10_000 },
      }),
    }),
  ],
  controllers: [CapturesController],
  providers: [CapturesService, LiveCaptures, CaptureQueue, CaptureRetention],
})
export class CapturesModule {}
