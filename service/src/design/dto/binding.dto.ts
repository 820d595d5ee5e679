import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { LIMITS, type LimitName } from '../../control/limits.js';
import { NullableNumber } from '../../page.js';

const LIMIT_NAMES = LIMITS.map(({ name }) => name);

class BoundDto {
  @ApiProperty({ enum: LIMIT_NAMES })
  name: LimitName;

  @ApiProperty({ description: 'rad/s' })
  lambda: number;
}

class LimitDto {
  @ApiProperty({ enum: LIMIT_NAMES })
  name: LimitName;

  @ApiProperty({ enum: ['upper', 'lower'] })
  side: 'upper' | 'lower';

  @NullableNumber('rad/s; null when it does not bind within the searched range')
  lambda: number | null;

  @ApiPropertyOptional({
    type: Number,
    nullable: true,
    description: 'Commissioned λ inside the bound, as a ratio above 1',
  })
  margin?: number | null;

  @ApiPropertyOptional({
    type: Number,
    nullable: true,
    description: 'The quantity at the commissioned λ, worst of the region',
  })
  value?: number | null;

  @ApiPropertyOptional({ description: 'What the quantity may be: at most, for the damping at least' })
  threshold?: number;

  @ApiPropertyOptional()
  unit?: string;
}

class RangeDto {
  @ApiProperty()
  low: number;

  @ApiProperty()
  high: number;
}

export class BindingDto {
  @NullableNumber('λ of the proposed gains, rad/s')
  lambda: number | null;

  @ApiProperty({ description: 'rad/s' })
  commissionedLambda: number;

  @ApiProperty({ description: 'Whether the commissioned λ is kept' })
  kept: boolean;

  @ApiProperty({ type: BoundDto, nullable: true, description: 'What stops λ from going higher' })
  upper: BoundDto | null;

  @ApiProperty({ type: BoundDto, nullable: true, description: 'What stops λ from going lower' })
  lower: BoundDto | null;

  @ApiProperty({ type: RangeDto, nullable: true, description: 'rad/s' })
  allowed: RangeDto | null;

  @ApiProperty({ type: [LimitDto] })
  limits: LimitDto[];

  @ApiProperty()
  searched: RangeDto;

  @ApiProperty()
  reason: string;

  @ApiProperty({ type: [String] })
  waysOut: string[];
}
