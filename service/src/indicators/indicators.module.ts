import { Module } from '@nestjs/common';
import { RecentSeconds } from './recent-seconds.js';
import { RetentionService } from './retention.service.js';

@Module({ providers: [RecentSeconds, RetentionService], exports: [RecentSeconds] })
export class IndicatorsModule {}
