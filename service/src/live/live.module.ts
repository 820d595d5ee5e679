import { Module } from '@nestjs/common';
import { AuthModule } from '../auth/auth.module.js';
import { IndicatorsModule } from '../indicators/indicators.module.js';
import { TelemetryModule } from '../telemetry/telemetry.module.js';
import { LiveGateway } from './live.gateway.js';
import { TileSource } from './tile-source.js';

@Module({ imports: [AuthModule, TelemetryModule, IndicatorsModule], providers: [LiveGateway, TileSource] })
export class LiveModule {}
