import { Controller, Get, Header, Module, ServiceUnavailableException } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { ApiExcludeController, ApiOkResponse, ApiProperty } from '@nestjs/swagger';
import { SkipThrottle } from '@nestjs/throttler';
import { InjectDataSource } from '@nestjs/typeorm';
import { collectDefaultMetrics, register } from 'prom-client';
import type { DataSource } from 'typeorm';
import { Public } from '../auth/public.decorator.js';
import type { Settings } from '../settings.js';

collectDefaultMetrics();

class StatusDto {
  @ApiProperty({ description: 'Whether this is the demo with its invented works' })
  demo: boolean;

  @ApiProperty({ description: 'Now, by the service' })
  at: Date;
}

/** For whoever keeps the process running: is it alive, can it work, how does it fare. */
@ApiExcludeController()
@SkipThrottle()
@Public()
@Controller()
export class HealthController {
  constructor(@InjectDataSource() private readonly dataSource: DataSource) {}

  @Get('health/live')
  live(): { status: string } {
    return { status: 'live' };
  }

  @Get('health/ready')
  async ready(): Promise<{ status: string }> {
    try {
      await this.dataSource.query('SELECT 1');
    } catch (error) {
      throw new ServiceUnavailableException(`The database does not answer: ${(error as Error).message}`);
    }
    return { status: 'ready' };
  }

  @Get('metrics')
  @Header('content-type', register.contentType)
  metrics(): Promise<string> {
    return register.metrics();
  }
}

@Public()
@Controller('status')
export class StatusController {
  constructor(private readonly config: ConfigService<Settings, true>) {}

  @Get()
  @ApiOkResponse({ type: StatusDto })
  status(): StatusDto {
    return { demo: this.config.get('DEMO', { infer: true }), at: new Date() };
  }
}

@Module({ controllers: [HealthController, StatusController] })
export class HealthModule {}
