import { Module } from '@nestjs/common';
import { RecentSeconds } from './recent-seconds.js';

@Module({ providers: [RecentSeconds], exports: [RecentSeconds] })
export class IndicatorsModule {}
