import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  IsBoolean,
  IsIn,
  IsNotEmptyObject,
  IsNumber,
  IsOptional,
  IsPositive,
  Max,
  Min,
  ValidateNested,
} from 'class-validator';
import { STRUCTURES, type Structure } from '../../control/pole-placement.js';
import { DesignControllerDto, DesignMoveDto, DesignPlantDto } from './design-request.dto.js';
import { PatternDto } from './pattern.dto.js';

class BoundsDto {
  @ApiProperty({ minimum: 1e-6, maximum: 1e6 })
  @IsNumber()
  @Min(1e-6)
  @Max(1e6)
  low: number;

  @ApiProperty({ minimum: 1e-6, maximum: 1e6 })
  @IsNumber()
  @Min(1e-6)
  @Max(1e6)
  high: number;
}

class RegionDto {
  @ApiProperty({ type: BoundsDto, description: 'K, (mm/s)/%' })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => BoundsDto)
  gain: BoundsDto;

  @ApiProperty({ type: BoundsDto, description: 'α, rad/s' })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => BoundsDto)
  pole: BoundsDto;
}

class LimitTolerancesDto {
  @ApiProperty({ description: 'Largest following error on the move, mm' })
  @IsNumber()
  @IsPositive()
  @Max(1e6)
  followingError: number;

  @ApiPropertyOptional({ description: 'Largest output ripple while holding, % RMS', default: 1 })
  @IsOptional()
  @IsNumber()
  @IsPositive()
  @Max(100)
  ripplePct?: number;

  @ApiPropertyOptional({ description: 'Largest Ms with all delays', default: 2 })
  @IsOptional()
  @IsNumber()
  @Min(1.01)
  @Max(100)
  maxSensitivity?: number;

  @ApiPropertyOptional({ description: 'Smallest damping ratio of the sampled loop' })
  @IsOptional()
  @IsNumber()
  @IsPositive()
  @Max(1)
  damping?: number;
}

export class LimitsRequestDto {
  @ApiProperty({ type: DesignPlantDto })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => DesignPlantDto)
  plant: DesignPlantDto;

  @ApiPropertyOptional({
    type: RegionDto,
    description: '95 % region; its corners are checked beside the plant',
  })
  @IsOptional()
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => RegionDto)
  region?: RegionDto;

  @ApiProperty({ enum: STRUCTURES })
  @IsIn(STRUCTURES)
  structure: Structure;

  @ApiProperty({
    type: PatternDto,
    description: 'Its frequency is the λ that is kept where no limit forbids it',
  })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => PatternDto)
  pattern: PatternDto;

  @ApiPropertyOptional({ default: false })
  @IsOptional()
  @IsBoolean()
  feedForward?: boolean;

  @ApiProperty({ type: DesignControllerDto })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => DesignControllerDto)
  controller: DesignControllerDto;

  @ApiProperty({
    type: DesignMoveDto,
    description: 'At most 20 000 samples long: it is simulated hundreds of times',
  })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => DesignMoveDto)
  move: DesignMoveDto;

  @ApiProperty({ type: LimitTolerancesDto })
  @IsNotEmptyObject()
  @ValidateNested()
  @Type(() => LimitTolerancesDto)
  tolerances: LimitTolerancesDto;
}
