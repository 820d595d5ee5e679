import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  IsBoolean,
  IsIn,
  IsInt,
  IsNotEmpty,
  IsNumber,
  IsObject,
  IsOptional,
  IsPositive,
  IsString,
  Max,
  MaxLength,
  Min,
  ValidateNested,
} from 'class-validator';
import { STRUCTURES, type Structure } from '../../control/pole-placement.js';
import { PatternDto } from '../../design/dto/pattern.dto.js';
import { ACTUATORS, type Actuator } from '../axis.entity.js';

export class GainsDto {
  @ApiProperty({ description: '%/mm' })
  @IsNumber()
  kp: number;

  @ApiProperty({ description: '%/(mm·s)' })
  @IsNumber()
  ki: number;

  @ApiProperty({ description: '%·s/mm' })
  @IsNumber()
  kd: number;

  @ApiProperty({ description: '%·s/mm', default: 0 })
  @IsOptional()
  @IsNumber()
  kv: number = 0;

  @ApiProperty({ description: '%·s²/mm', default: 0 })
  @IsOptional()
  @IsNumber()
  ka: number = 0;
}

export class PlantDto {
  @ApiProperty({ description: 'K, (mm/s)/%' })
  @IsNumber()
  @IsPositive()
  gain: number;

  @ApiProperty({ description: 'α, rad/s' })
  @IsNumber()
  @IsPositive()
  pole: number;
}

export class TolerancesDto {
  @ApiProperty({ description: 'mm' })
  @IsNumber()
  @IsPositive()
  followingError: number;

  @ApiProperty({ description: '% of the baseline gain' })
  @IsNumber()
  @IsPositive()
  @Max(90)
  gainPct: number;

  @ApiProperty({ description: '% of the baseline pole' })
  @IsNumber()
  @IsPositive()
  @Max(90)
  polePct: number;

  @ApiProperty({ description: '% of moving time with the output at its limit' })
  @IsNumber()
  @Min(0)
  @Max(100)
  saturatedPct: number;
}

export class TravelDto {
  @ApiProperty({ description: 'mm' })
  @IsNumber()
  min: number;

  @ApiProperty({ description: 'mm' })
  @IsNumber()
  max: number;
}

export class AxisMoveDto {
  @ApiProperty({ description: 'mm' })
  @IsNumber()
  @IsPositive()
  distance: number;

  @ApiProperty({ description: 's' })
  @IsNumber()
  @IsPositive()
  @Max(120)
  duration: number;
}

export class CreateAxisDto {
  @ApiProperty()
  @IsInt()
  machineId: number;

  @ApiProperty({ description: 'Unique on its site', example: 'PR-01 ram' })
  @IsString()
  @IsNotEmpty()
  @MaxLength(60)
  tag: string;

  @ApiProperty()
  @IsString()
  @IsNotEmpty()
  @MaxLength(120)
  name: string;

  @ApiProperty({ enum: ACTUATORS })
  @IsIn(ACTUATORS)
  actuator: Actuator;

  @ApiProperty({ description: 'mm per count' })
  @IsNumber()
  @IsPositive()
  resolution: number;

  @ApiProperty({ description: 's' })
  @IsNumber()
  @Min(0.00005)
  @Max(0.1)
  sampleTime: number;

  @ApiProperty()
  @IsObject()
  @ValidateNested()
  @Type(() => TravelDto)
  travel: TravelDto;

  @ApiProperty({ enum: STRUCTURES })
  @IsIn(STRUCTURES)
  structure: Structure;

  @ApiProperty({ type: PatternDto })
  @IsObject()
  @ValidateNested()
  @Type(() => PatternDto)
  pattern: PatternDto;

  @ApiProperty()
  @IsBoolean()
  feedForward: boolean;

  @ApiPropertyOptional({ description: 'The gains it runs with; placed from the baseline when absent' })
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => GainsDto)
  gains?: GainsDto;

  @ApiPropertyOptional({
    description: 'Plant at commissioning; without one an engineer confirms the first usable estimate',
  })
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => PlantDto)
  baseline?: PlantDto;

  @ApiProperty()
  @IsObject()
  @ValidateNested()
  @Type(() => TolerancesDto)
  tolerances: TolerancesDto;

  @ApiProperty({ description: 'Its own typical move' })
  @IsObject()
  @ValidateNested()
  @Type(() => AxisMoveDto)
  move: AxisMoveDto;
}

export class ChangeAxisDto {
  @ApiPropertyOptional()
  @IsOptional()
  @IsString()
  @IsNotEmpty()
  @MaxLength(120)
  name?: string;

  @ApiPropertyOptional()
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => TolerancesDto)
  tolerances?: TolerancesDto;

  @ApiPropertyOptional()
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => AxisMoveDto)
  move?: AxisMoveDto;

  @ApiPropertyOptional()
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => TravelDto)
  travel?: TravelDto;
}
