import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';

export class IntervalDto {
  @ApiProperty()
  value: number;

  @ApiProperty({ description: 'Lower bound of the 95 % interval' })
  low: number;

  @ApiProperty({ description: 'Upper bound of the 95 % interval' })
  high: number;
}

export class LnCovarianceDto {
  @ApiProperty({ description: 'Variance of ln K' })
  gain: number;

  @ApiProperty({ description: 'Covariance of ln K and ln α' })
  cross: number;

  @ApiProperty({ description: 'Variance of ln α' })
  pole: number;
}

export class AxisEstimateDto {
  @ApiProperty()
  at: Date;

  @ApiProperty({ type: IntervalDto, description: '(mm/s)/%' })
  gain: IntervalDto;

  @ApiProperty({ type: IntervalDto, description: 'rad/s' })
  pole: IntervalDto;

  @ApiPropertyOptional({ type: IntervalDto, description: 'Only where direction makes a difference' })
  gainForward?: IntervalDto;

  @ApiPropertyOptional({ type: IntervalDto })
  gainReverse?: IntervalDto;

  @ApiProperty({ type: IntervalDto, description: '% of output' })
  coulomb: IntervalDto;

  @ApiProperty({ type: IntervalDto, description: '% of output' })
  bias: IntervalDto;

  @ApiProperty({ description: 's' })
  deadTime: number;

  @ApiProperty()
  lnCovariance: LnCovarianceDto;

  @ApiProperty({ description: 'Fit of the simulated velocity, %' })
  fitPct: number;

  @ApiProperty({ description: 'Motion it rests on, s' })
  movingSeconds: number;

  @ApiProperty({ enum: ['usable', 'doubtful', 'unidentifiable'] })
  verdict: 'usable' | 'doubtful' | 'unidentifiable';

  @ApiProperty({ type: [String] })
  remarks: readonly string[];
}

export class RatioPointDto {
  @ApiProperty({ description: 'K/K₀' })
  gainRatio: number;

  @ApiProperty({ description: 'α/α₀' })
  poleRatio: number;
}
