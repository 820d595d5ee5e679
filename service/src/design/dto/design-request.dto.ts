import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  ArrayMaxSize,
  ArrayMinSize,
  IsArray,
  IsBoolean,
  IsIn,
  IsInt,
  IsNotEmptyObject,
  IsNumber,
  IsOptional,
  IsPositive,
  Max,
  Min,
  ValidateIf,
  ValidateNested,
} from 'class-validator';
import { STRUCTURES, type Structure } from '../../control/pole-placement.js';
import { PatternDto } from './pattern.dto.js';

/** Ranges far beyond any axis, within which every figure stays a finite number. */
const FASTEST = 1e5;
const SLOWEST = 1e-3;
const LARGEST_GAIN = 1e12;

export class DesignPlantDto {
  @ApiProperty({ description: 'K, (mm/s)/%', minimum: 1e-6, maximum: 1e6 })
  @IsNumber()
  @Min(1e-6)
  @Max(1e6)
  gain: number;

  @ApiProperty({ description: 'α, rad/s', minimum: SLOWEST, maximum: FASTEST })
  @IsNumber()
  @Min(SLOWEST)
  @Max(FASTEST)
  pole: number;

  @ApiPropertyOptional({ description: 'Dead time, s', default: 0, maximum: 10 })
  @IsOptional()
  @IsNumber()
  @Min(0)
  @Max(10)
  deadTime?: number;

  @ApiPropertyOptional({ description: 'Coulomb friction, % of output', default: 0, maximum: 1000 })
  @IsOptional()
  @IsNumber()
  @Min(0)
  @Max(1000)
  coulomb?: number;

  @ApiPropertyOptional({ description: 'Bias, % of output', default: 0, minimum: -1000, maximum: 1000 })
  @IsOptional()
  @IsNumber()
  @Min(-1000)
  @Max(1000)
  bias?: number;
}

export class DesignGainsDto {
  @ApiProperty({ description: '%/mm' })
  @IsNumber()
  @Min(-LARGEST_GAIN)
  @Max(LARGEST_GAIN)
  kp: number;

  @ApiProperty({ description: '%/(mm·s)' })
  @IsNumber()
  @Min(-LARGEST_GAIN)
  @Max(LARGEST_GAIN)
  ki: number;

  @ApiProperty({ description: '%·s/mm' })
  @IsNumber()
  @Min(-LARGEST_GAIN)
  @Max(LARGEST_GAIN)
  kd: number;

  @ApiPropertyOptional({ description: '%·s/mm; absent: as feedForward says' })
  @IsOptional()
  @IsNumber()
  @Min(-LARGEST_GAIN)
  @Max(LARGEST_GAIN)
  kv?: number;

  @ApiPropertyOptional({ description: '%·s²/mm; absent: as feedForward says' })
  @IsOptional()
  @IsNumber()
  @Min(-LARGEST_GAIN)
  @Max(LARGEST_GAIN)
  ka?: number;
}

export class DesignControllerDto {
  @ApiProperty({ description: 'Sample time, s', minimum: 1e-6, maximum: 10 })
  @IsNumber()
  @Min(1e-6)
  @Max(10)
  sampleTime: number;

  @ApiPropertyOptional({ description: 'Samples from computing an output to applying it', default: 0 })
  @IsOptional()
  @IsInt()
  @Min(0)
  @Max(20)
  outputDelaySamples?: number;

  @ApiPropertyOptional({ description: 'Position resolution, mm; 0 is continuous', default: 0 })
  @IsOptional()
  @IsNumber()
  @Min(0)
  @Max(1000)
  resolution?: number;

  @ApiPropertyOptional({ description: 'Output limit, %', default: 100 })
  @IsOptional()
  @IsNumber()
  @Min(1e-3)
  @Max(1000)
  outputLimit?: number;

  @ApiPropertyOptional({
    enum: ['clamp', 'conditional'],
    default: 'clamp',
    description:
      'Integrator law: "clamp" also drags the integrator inward, "conditional" only stops its growth',
  })
  @IsOptional()
  @IsIn(['clamp', 'conditional'])
  antiWindup?: 'clamp' | 'conditional';
}

export class DesignMoveDto {
  @ApiProperty({ description: 'mm, negative for the other direction', minimum: -1e6, maximum: 1e6 })
  @IsNumber()
  @Min(-1e6)
  @Max(1e6)
  distance: number;

  @ApiProperty({ description: 's', maximum: 10_000 })
  @IsNumber()
  @IsPositive()
  @Max(10_000)
  duration: number;

  @ApiPropertyOptional({ description: 's at rest after the move', default: 1, maximum: 10_000 })
  @IsOptional()
  @IsNumber()
  @Min(0)
  @Max(10_000)
  settle?: number;

  @ApiProperty({ enum: ['raised-cosine', 'step'] })
  @IsIn(['raised-cosine', 'step'])
  profile: 'raised-cosine' | 'step';

  @ApiPropertyOptional({
    default: false,
    description: 'Starts as an axis in production: held, its integrator at the bias',
  })
  @IsOptional()
  @IsBoolean()
  holding?: boolean;

  @ApiPropertyOptional({ description: 'Thins the trace to about this many points', minimum: 50 })
  @IsOptional()
  @IsInt()
  @Min(50)
  @Max(200_000)
  points?: number;
}

export class DesignRequestDto {
  @ApiProperty({ type: DesignPlantDto })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => DesignPlantDto)
  plant: DesignPlantDto;

  @ApiProperty({ enum: STRUCTURES })
  @IsIn(STRUCTURES)
  structure: Structure;

  @ApiPropertyOptional({ type: PatternDto, description: 'Needed unless gains are given' })
  @ValidateIf(({ gains, pattern }: DesignRequestDto) => gains === undefined || pattern !== undefined)
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => PatternDto)
  pattern?: PatternDto;

  @ApiPropertyOptional({ type: DesignGainsDto, description: 'Analyse these instead of placing poles' })
  @IsOptional()
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => DesignGainsDto)
  gains?: DesignGainsDto;

  @ApiPropertyOptional({
    default: false,
    description: 'Kv = 1/K (PI-D: 1/K + Kd) and Ka = 1/(Kα); a Kv or Ka given with the gains is kept',
  })
  @IsOptional()
  @IsBoolean()
  feedForward?: boolean;

  @ApiProperty({ type: DesignControllerDto })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => DesignControllerDto)
  controller: DesignControllerDto;

  @ApiPropertyOptional({ type: DesignMoveDto, description: 'At most 200 000 samples long' })
  @IsOptional()
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => DesignMoveDto)
  move?: DesignMoveDto;

  @ApiPropertyOptional({
    type: [Number],
    description: 'Hz; 200 logarithmic points up to the Nyquist frequency when absent',
  })
  @IsOptional()
  @IsArray()
  @ArrayMinSize(1)
  @ArrayMaxSize(5000)
  @IsNumber({}, { each: true })
  @Min(1e-6, { each: true })
  @Max(1e7, { each: true })
  frequenciesHz?: number[];

  @ApiPropertyOptional({ default: false, description: 'What a person should know of these gains, in words' })
  @IsOptional()
  @IsBoolean()
  remarks?: boolean;
}
