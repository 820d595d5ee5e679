import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { ArrayMaxSize, ArrayMinSize, IsArray, IsIn, IsNumber, IsPositive, ValidateIf } from 'class-validator';
import type { PolePattern } from '../../control/pole-placement.js';

export const PATTERN_KINDS = ['triple', 'real', 'pair', 'butterworth', 'itae', 'bessel'] as const;

/** Where the three closed-loop poles go; magnitudes in rad/s. Which fields count depends on `kind`. */
export class PatternDto {
  @ApiProperty({ enum: PATTERN_KINDS })
  @IsIn(PATTERN_KINDS)
  kind: PolePattern['kind'];

  @ApiPropertyOptional({ description: 'kind "triple": all three poles at −lambda, rad/s' })
  @ValidateIf(({ kind }: PatternDto) => kind === 'triple')
  @IsNumber()
  @IsPositive()
  lambda?: number;

  @ApiPropertyOptional({ description: 'kind "real": three magnitudes, rad/s', type: [Number] })
  @ValidateIf(({ kind }: PatternDto) => kind === 'real')
  @IsArray()
  @ArrayMinSize(3)
  @ArrayMaxSize(3)
  @IsNumber({}, { each: true })
  @IsPositive({ each: true })
  poles?: readonly [number, number, number];

  @ApiPropertyOptional({ description: 'kind "pair": the real pole, rad/s' })
  @ValidateIf(({ kind }: PatternDto) => kind === 'pair')
  @IsNumber()
  @IsPositive()
  pole?: number;

  @ApiPropertyOptional({ description: 'kind "pair": damping of the pair' })
  @ValidateIf(({ kind }: PatternDto) => kind === 'pair')
  @IsNumber()
  @IsPositive()
  zeta?: number;

  @ApiPropertyOptional({ description: 'kinds "pair", "butterworth", "itae", "bessel": rad/s' })
  @ValidateIf(({ kind }: PatternDto) => kind !== 'triple' && kind !== 'real')
  @IsNumber()
  @IsPositive()
  omega?: number;
}
