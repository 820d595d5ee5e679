import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { GainsDto } from '../../fleet/dto/axis-sheet.dto.js';
import { NullableNumber } from '../../page.js';

export class ComplexDto {
  @ApiProperty()
  re: number;

  @ApiProperty()
  im: number;
}

export class ClosedLoopDto {
  @ApiProperty({ type: [ComplexDto], description: 'rad/s' })
  poles: readonly ComplexDto[];

  @ApiProperty({ type: [ComplexDto], description: 'rad/s' })
  zeros: ComplexDto[];

  @NullableNumber('First frequency where the closed loop falls to −3 dB of its value at rest, Hz')
  bandwidthHz: number | null;

  @NullableNumber('Largest magnitude, dB; null when the loop is not stable')
  peakDb: number | null;

  @NullableNumber('Where, Hz; null when it is only approached at infinite frequency')
  peakHz: number | null;
}

export class StepDto {
  @NullableNumber('% of the final value; null when the loop is not stable')
  overshootPct: number | null;

  @NullableNumber('Time of the highest point, s; null without overshoot')
  peakTime: number | null;

  @NullableNumber('Furthest excursion against the step, % of the final value')
  undershootPct: number | null;

  @NullableNumber('10 … 90 %, s')
  riseTime: number | null;

  @NullableNumber('Last time 2 % away from the final value, s')
  settlingTime: number | null;
}

export class SteadyErrorsDto {
  @NullableNumber('mm per mm/s; null where it grows without bound')
  ramp: number | null;

  @NullableNumber('mm per mm/s²; null where it grows without bound')
  acceleration: number | null;
}

export class GainCrossoverDto {
  @ApiProperty({ description: 'Hz' })
  frequencyHz: number;

  @ApiProperty({ description: 'degrees' })
  phaseMarginDeg: number;

  @ApiProperty({ description: 's' })
  delayMargin: number;
}

export class MarginsDto {
  @ApiProperty({ type: [GainCrossoverDto] })
  gainCrossovers: GainCrossoverDto[];

  @NullableNumber('dB by which all gains may rise; null without limit')
  gainMarginHighDb: number | null;

  @NullableNumber('dB (negative) by which all gains may fall; null without limit')
  gainMarginLowDb: number | null;

  @NullableNumber('degrees, smallest over all gain crossovers')
  phaseMarginDeg: number | null;

  @NullableNumber('Hz, of that crossover')
  gainCrossoverHz: number | null;

  @NullableNumber('Hz')
  phaseCrossoverHz: number | null;

  @NullableNumber('Ms of the continuous loop; 1 when only approached at infinite frequency')
  maxSensitivity: number | null;

  @NullableNumber('Hz; null when only approached at infinite frequency')
  maxSensitivityHz: number | null;

  @NullableNumber('s, smallest pure delay that makes the loop unstable')
  delayMargin: number | null;
}

export class ResponseCurveDto {
  @ApiProperty({ type: [Number], description: 'dB' })
  magnitudeDb: number[];

  @ApiProperty({ type: [Number], description: 'degrees; open loop continuous, closed loop in (−180, 180]' })
  phaseDeg: number[];
}

export class FrequencyResponseDto {
  @ApiProperty({ type: [Number], description: 'Hz' })
  frequencyHz: number[];

  @ApiProperty({ type: ResponseCurveDto })
  openLoop: ResponseCurveDto;

  @ApiProperty({ type: ResponseCurveDto })
  closedLoop: ResponseCurveDto;
}

export class SampledLoopDto {
  @ApiProperty({ type: [ComplexDto], description: 'Eigenvalues in z' })
  poles: ComplexDto[];

  @ApiProperty({ type: [ComplexDto], description: 'ln(z)/T, rad/s; poles at z = 0 left out' })
  equivalentPoles: ComplexDto[];

  @ApiProperty({ description: 'Largest |z|' })
  spectralRadius: number;

  @ApiProperty()
  stable: boolean;

  @ApiProperty({ description: 'Smallest damping ratio of all poles' })
  damping: number;

  @NullableNumber('s; null when the loop is stable at no sample time')
  maxStableSampleTime: number | null;

  @NullableNumber('%, from the resolution while holding; null when the loop is not stable')
  outputRippleRms: number | null;

  @NullableNumber('Ms with hold, output delay and dead time; null when the loop is not stable')
  maxSensitivity: number | null;

  @NullableNumber('Hz')
  maxSensitivityHz: number | null;
}

export class MoveTraceDto {
  @ApiProperty({ type: [Number], description: 's' })
  time: number[];

  @ApiProperty({ type: [Number], description: 'mm' })
  target: number[];

  @ApiProperty({ type: [Number], description: 'mm' })
  position: number[];

  @ApiProperty({ type: [Number], description: 'mm/s' })
  velocity: number[];

  @ApiProperty({ type: [Number], description: '%' })
  output: number[];

  @ApiProperty({ type: [Number], description: 'Integrator, %' })
  integrator: number[];
}

export class MoveAnswerDto {
  @ApiProperty({ description: 'mm' })
  peakFollowingError: number;

  @ApiProperty({ description: 'mm' })
  rmsFollowingError: number;

  @ApiProperty({ description: '% of all samples with the output at 99.9 % of its limit or more' })
  saturatedPct: number;

  @ApiProperty({ description: 'mm beyond the end point' })
  overshoot: number;

  @ApiProperty({ description: '%' })
  peakOutput: number;

  @ApiProperty({ type: MoveTraceDto })
  trace: MoveTraceDto;
}

export class DesignAnswerDto {
  @ApiProperty({ type: GainsDto })
  gains: GainsDto;

  @ApiProperty({ type: ClosedLoopDto, description: 'Continuous loop, delays left out' })
  closedLoop: ClosedLoopDto;

  @ApiProperty({ type: StepDto, description: 'Linear unit step of the continuous loop' })
  step: StepDto;

  @ApiProperty({ type: SteadyErrorsDto })
  errors: SteadyErrorsDto;

  @ApiProperty({ type: MarginsDto })
  margins: MarginsDto;

  @ApiProperty({ type: FrequencyResponseDto })
  frequencyResponse: FrequencyResponseDto;

  @ApiProperty({ type: SampledLoopDto, description: 'The loop as the controller runs it' })
  sampled: SampledLoopDto;

  @ApiProperty({ type: MoveAnswerDto, nullable: true, description: 'null when no move was asked for' })
  move: MoveAnswerDto | null;

  @ApiPropertyOptional({ type: [String], description: 'In words, when asked for' })
  remarks?: string[];
}
