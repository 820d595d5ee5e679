import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  IsIn,
  IsInt,
  IsNumber,
  IsOptional,
  IsString,
  Max,
  MaxLength,
  Min,
  MinLength,
  ValidateNested,
} from 'class-validator';
import { IntervalDto } from '../../fleet/dto/axis-estimate.dto.js';
import type { Verdict } from '../../identification/plant-estimate.js';
import { NullableNumber, NullableText, PageOf, PageQuery } from '../../page.js';
import {
  CAPTURE_SOURCES,
  CAPTURE_STATUSES,
  type CaptureSource,
  type CaptureStatus,
} from '../capture.entity.js';

class UnitsDto {
  @ApiPropertyOptional({ enum: ['s', 'ms', 'us'], default: 's' })
  @IsOptional()
  @IsIn(['s', 'ms', 'us'])
  time?: 's' | 'ms' | 'us';

  @ApiPropertyOptional({ enum: ['mm', 'um', 'm', 'in'], default: 'mm' })
  @IsOptional()
  @IsIn(['mm', 'um', 'm', 'in'])
  position?: 'mm' | 'um' | 'm' | 'in';

  @ApiPropertyOptional({ enum: ['percent', 'fraction', 'volts10'], default: 'percent' })
  @IsOptional()
  @IsIn(['percent', 'fraction', 'volts10'])
  output?: 'percent' | 'fraction' | 'volts10';
}

/** Names of the columns; sent as JSON in the form field `mapping`. */
export class CaptureMappingDto {
  @ApiProperty()
  @IsString()
  @MinLength(1)
  @MaxLength(200)
  time: string;

  @ApiPropertyOptional()
  @IsOptional()
  @IsString()
  @MinLength(1)
  @MaxLength(200)
  target?: string;

  @ApiProperty()
  @IsString()
  @MinLength(1)
  @MaxLength(200)
  position: string;

  @ApiProperty()
  @IsString()
  @MinLength(1)
  @MaxLength(200)
  output: string;

  @ApiPropertyOptional({ type: UnitsDto })
  @IsOptional()
  @ValidateNested()
  @Type(() => UnitsDto)
  units?: UnitsDto;
}

/** The fields beside the file. */
export class UploadCaptureDto {
  @ApiProperty({ type: 'string', format: 'binary' })
  file: unknown;

  @ApiPropertyOptional({ description: 'The axis that it was taken from' })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  axisId?: number;

  @ApiPropertyOptional({
    description: 'The site it belongs to, without an axis; the person’s first where not given',
  })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  siteId?: number;

  @ApiProperty({ description: 'JSON: { time, target?, position, output, units? }' })
  @IsString()
  @MaxLength(4000)
  mapping: string;
}

export class CaptureIdDto {
  @ApiProperty()
  id: number;
}

class IdentificationDto {
  @ApiProperty({ type: IntervalDto, nullable: true, description: 'K, (mm/s)/%; null when it cannot be said' })
  gain: IntervalDto | null;

  @ApiProperty({ type: IntervalDto, nullable: true, description: 'α, rad/s' })
  pole: IntervalDto | null;

  @ApiPropertyOptional({ type: IntervalDto })
  gainForward?: IntervalDto;

  @ApiPropertyOptional({ type: IntervalDto })
  gainReverse?: IntervalDto;

  @ApiProperty({ type: IntervalDto, nullable: true, description: 'f, %' })
  coulomb: IntervalDto | null;

  @ApiProperty({ type: IntervalDto, nullable: true, description: 'b, %' })
  bias: IntervalDto | null;

  @NullableNumber('τ, s')
  deadTime: number | null;

  @NullableNumber('100·(1 − ‖v − v̂‖/‖v − v̄‖) of the simulated velocity')
  fitPct: number | null;

  @ApiProperty({ description: 's' })
  movingSeconds: number;

  @ApiProperty({ enum: ['usable', 'doubtful', 'unidentifiable'] })
  verdict: Verdict;

  @ApiProperty({ type: [String] })
  remarks: readonly string[];
}

export class CaptureDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  siteId: number;

  @NullableNumber()
  axisId: number | null;

  @NullableText()
  axisTag: string | null;

  @ApiProperty()
  timeZone: string;

  @ApiProperty({ enum: CAPTURE_SOURCES })
  source: CaptureSource;

  @NullableNumber('The alert it was kept around')
  alertId: number | null;

  @ApiProperty()
  createdAt: Date;

  @NullableText('null: kept by the service')
  createdBy: string | null;

  @ApiProperty()
  fileName: string;

  @ApiProperty({ enum: CAPTURE_STATUSES })
  status: CaptureStatus;

  @ApiProperty({ description: 'Its samples are still coming in' })
  recording: boolean;

  @ApiPropertyOptional({ description: 'Why it failed' })
  problem?: string;

  @NullableNumber()
  samples: number | null;

  @NullableNumber('s')
  sampleTime: number | null;

  @NullableNumber('s')
  duration: number | null;

  @ApiPropertyOptional({ type: IdentificationDto })
  identification?: IdentificationDto;
}

export class CapturePageDto extends PageOf(CaptureDto, 'CapturePageDto') {}

export class CaptureQuery extends PageQuery {
  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  axisId?: number;
}

export class TraceQuery {
  @ApiPropertyOptional({ minimum: 100, maximum: 20_000, default: 1200 })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  @Min(100)
  @Max(20_000)
  points: number = 1200;
}

const column = { type: 'array', items: { type: 'number', nullable: true } } as const;

/** A capture thinned for a chart; null where there is nothing. */
export class CaptureTraceDto {
  @ApiProperty({ type: [Number], description: 's' })
  time: number[];

  @ApiProperty({ ...column, description: 'mm' })
  target: (number | null)[];

  @ApiProperty({ ...column, description: 'mm' })
  position: (number | null)[];

  @ApiProperty({ ...column, description: '%' })
  output: (number | null)[];

  @ApiProperty({ ...column, description: 'Measured, mm/s' })
  velocity: (number | null)[];

  @ApiProperty({ ...column, description: 'Of the identified plant, mm/s' })
  simulatedVelocity: (number | null)[];

  @ApiProperty({ ...column, description: 'Measured less simulated position, mm' })
  residual: (number | null)[];
}

export class RecordCaptureDto {
  @ApiProperty({ minimum: 5, maximum: 120, description: 's' })
  @IsNumber()
  @Min(5)
  @Max(120)
  seconds: number;
}

export class CaptureBaselineDto {
  @ApiPropertyOptional({ description: 'The axis, where the capture names none' })
  @IsOptional()
  @IsInt()
  axisId?: number;
}
