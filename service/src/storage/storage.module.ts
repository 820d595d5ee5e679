import { Module } from '@nestjs/common';
import { RetentionService } from './retention.service.js';
import { RetentionSettings } from './retention-settings.service.js';
import { StorageController } from './storage.controller.js';
import { StorageReport } from './storage-report.service.js';
import { StorageService } from './storage.service.js';
import { StorageThread } from './storage-thread.service.js';

@Module({
  controllers: [StorageController],
  providers: [RetentionSettings, RetentionService, StorageThread, StorageService, StorageReport],
  exports: [RetentionSettings],
})
export class StorageModule {}
