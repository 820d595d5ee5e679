import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsDate, IsIn, IsInt, IsOptional, Max, Min } from 'class-validator';
import { STRUCTURES, type Structure } from '../../control/pole-placement.js';
import { PatternDto } from '../../design/dto/pattern.dto.js';
import { NullableNumber, NullableText, PageOf, PageQuery } from '../../page.js';
import type { TuningSource } from '../tuning-revision.entity.js';
import { AxisEstimateDto } from './axis-estimate.dto.js';
import { GainsDto, PlantDto } from './axis-sheet.dto.js';

export class SpanQuery extends PageQuery {
  @ApiPropertyOptional({ description: 'Default: one day back (estimates), one hour back (indicators)' })
  @IsOptional()
  @Type(() => Date)
  @IsDate()
  from?: Date;

  @ApiPropertyOptional({ description: 'Default: now' })
  @IsOptional()
  @Type(() => Date)
  @IsDate()
  to?: Date;

  @ApiPropertyOptional({
    minimum: 1,
    maximum: 1000,
    description:
      'Thinned for a chart of so many points, on one page; resolution, limit and cursor do not count then',
  })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  @Min(1)
  @Max(1000)
  points?: number;
}

export const RESOLUTIONS = ['second', 'minute', 'hour'] as const;

export class IndicatorQuery extends SpanQuery {
  @ApiPropertyOptional({ enum: RESOLUTIONS, default: 'minute' })
  @IsOptional()
  @IsIn(RESOLUTIONS)
  resolution: (typeof RESOLUTIONS)[number] = 'minute';
}

export class ChartPointDto {
  @ApiProperty({ description: 'EWMA over baseline' })
  ewma: number;

  @NullableNumber('Lower limit of the EWMA over baseline; null while learning')
  low: number | null;

  @NullableNumber()
  high: number | null;

  @ApiProperty({ description: 'Larger CUSUM over its decision interval: 1 signals' })
  cusumShare: number;

  @ApiProperty({ enum: ['learning', 'in-control', 'signal', 'drifted'] })
  state: string;
}

export class ControlChartDto {
  @ApiProperty()
  gain: ChartPointDto;

  @ApiProperty()
  pole: ChartPointDto;
}

export class HistoricEstimateDto extends AxisEstimateDto {
  @ApiProperty({ type: ControlChartDto, nullable: true })
  chart: ControlChartDto | null;
}

export class EstimatePageDto extends PageOf(HistoricEstimateDto, 'EstimatePageDto') {}

export class IndicatorPointDto {
  @ApiProperty({ description: 'Start of the second, minute or hour' })
  at: Date;

  @NullableNumber('mm, while moving')
  peakFollowingError: number | null;

  @NullableNumber('mm, while moving')
  rmsFollowingError: number | null;

  @NullableNumber('mm, while standing')
  peakStandingError: number | null;

  @NullableNumber('% of moving time')
  saturatedPct: number | null;

  @ApiProperty({ description: '% of the time' })
  movingPct: number;

  @ApiProperty({ description: '%' })
  outputRms: number;

  @ApiProperty({ description: '%' })
  peakOutput: number;

  @ApiProperty({ description: '% RMS above the loop’s band' })
  outputActivity: number;

  @NullableNumber('Hz')
  dominantHz: number | null;

  @ApiProperty()
  gaps: number;

  @ApiProperty()
  samples: number;
}

export class IndicatorPageDto extends PageOf(IndicatorPointDto, 'IndicatorPageDto') {}

export class TuningRevisionDto {
  @ApiProperty()
  revision: number;

  @ApiProperty({ description: 'Whether the axis runs with it now' })
  current: boolean;

  @ApiProperty({ enum: STRUCTURES })
  structure: Structure;

  @ApiProperty({ type: PatternDto, nullable: true })
  pattern: PatternDto | null;

  @NullableNumber('rad/s')
  lambda: number | null;

  @ApiProperty()
  feedForward: boolean;

  @ApiProperty()
  gains: GainsDto;

  @ApiProperty({ type: PlantDto, nullable: true, description: 'The plant these gains were computed for' })
  plant: PlantDto | null;

  @ApiProperty({ enum: ['commissioning', 'proposal', 'roll-back'] })
  source: TuningSource;

  @NullableNumber()
  proposalId: number | null;

  @ApiProperty()
  appliedAt: Date;

  @ApiProperty()
  appliedBy: string;

  @NullableText()
  note: string | null;
}

export class TuningPageDto extends PageOf(TuningRevisionDto, 'TuningPageDto') {}
