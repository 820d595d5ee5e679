import { Global, Module } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { TypeOrmModule } from '@nestjs/typeorm';
import type { Settings } from '../settings.js';
import { BackupService } from './backup.service.js';
import { dataSourceOptions } from './data-source.js';
import { Transactions } from './transactions.js';

@Global()
@Module({
  imports: [
    TypeOrmModule.forRootAsync({
      inject: [ConfigService],
      useFactory: (config: ConfigService<Settings, true>) =>
        dataSourceOptions(config.get('DATABASE', { infer: true })),
    }),
  ],
  providers: [Transactions, BackupService],
  exports: [Transactions, BackupService],
})
export class DatabaseModule {}
