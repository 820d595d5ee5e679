import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  IsBoolean,
  IsDate,
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
import { NullableNumber, NullableText, NullableTime, PageOf, PageQuery } from '../../page.js';
import { ALERT_STATES, type AlertState } from '../../alerts/alert.entity.js';
import { RULES, type RuleName } from '../../alerts/rules.js';
import { PROPOSAL_STATES, type ProposalState } from '../../proposals/proposal.entity.js';
import { ACTUATORS, AXIS_STATES, type Actuator, type AxisState } from '../axis.entity.js';

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

export class MaintenanceDto {
  @ApiProperty()
  @IsBoolean()
  on: boolean;

  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Date)
  @IsDate()
  until?: Date;

  @ApiProperty({ maxLength: 500 })
  @IsString()
  @IsNotEmpty()
  @MaxLength(500)
  reason: string;
}

export class ConfirmBaselineDto {
  @ApiProperty({ enum: [true] })
  @IsIn([true])
  confirm: true;
}

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

export class AxisIndicatorsDto {
  @NullableNumber('mm, while moving, last minute')
  peakFollowingError: number | null;

  @NullableNumber('mm, while moving, last minute')
  rmsFollowingError: number | null;

  @NullableNumber('% of moving time, last minute')
  saturatedPct: number | null;

  @ApiProperty()
  at: Date;
}

export class MaintenanceStateDto {
  @NullableTime()
  until: Date | null;

  @NullableText()
  reason: string | null;

  @NullableText()
  by: string | null;
}

export class AxisAlertDto {
  @ApiProperty()
  id: number;

  @ApiProperty({ enum: RULES })
  rule: RuleName;

  @ApiProperty()
  priority: string;

  @ApiProperty({ enum: ALERT_STATES })
  state: AlertState;
}

export class AxisProposalDto {
  @ApiProperty()
  id: number;

  @ApiProperty({ enum: PROPOSAL_STATES })
  state: ProposalState;
}

export class AxisDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  tag: string;

  @ApiProperty()
  name: string;

  @ApiProperty()
  siteId: number;

  @ApiProperty()
  siteName: string;

  @ApiProperty()
  timeZone: string;

  @ApiProperty()
  machineId: number;

  @ApiProperty()
  machineName: string;

  @ApiProperty({ enum: ACTUATORS })
  actuator: Actuator;

  @ApiProperty({ enum: AXIS_STATES })
  state: AxisState;

  @ApiProperty({ description: 'Why, in a sentence or two; the first is the gist' })
  stateReason: string;

  @NullableTime()
  stateSince: Date | null;

  @ApiProperty({ type: PlantDto, nullable: true })
  baseline: PlantDto | null;

  @NullableTime()
  baselineAt: Date | null;

  @ApiProperty({ type: AxisEstimateDto, nullable: true })
  estimate: AxisEstimateDto | null;

  @ApiProperty({ type: GainsDto, nullable: true })
  gains: GainsDto | null;

  @ApiProperty({ enum: STRUCTURES })
  structure: Structure;

  @ApiProperty({ type: PatternDto })
  pattern: PatternDto;

  @ApiProperty({ description: 'Frequency scale of the wanted poles: their geometric mean, rad/s' })
  lambda: number;

  @ApiProperty()
  feedForward: boolean;

  @ApiProperty()
  revision: number;

  @ApiProperty()
  tolerances: TolerancesDto;

  @ApiProperty()
  travel: TravelDto;

  @ApiProperty()
  move: AxisMoveDto;

  @ApiProperty({ description: 's' })
  sampleTime: number;

  @ApiProperty({ description: 'mm per count' })
  resolution: number;

  @ApiProperty({ type: AxisIndicatorsDto, nullable: true })
  indicators: AxisIndicatorsDto | null;

  @ApiProperty({ type: MaintenanceStateDto, nullable: true })
  maintenance: MaintenanceStateDto | null;

  @ApiProperty({
    type: [RatioPointDto],
    description: 'Former estimates over baseline, oldest first, at most 24',
  })
  trail: RatioPointDto[];

  @ApiProperty({ type: [AxisAlertDto] })
  openAlerts: AxisAlertDto[];

  @ApiProperty({ type: AxisProposalDto, nullable: true })
  openProposal: AxisProposalDto | null;

  @NullableTime()
  lastSampleAt: Date | null;
}

export class AxisPageDto extends PageOf(AxisDto, 'AxisPageDto') {}

export class AxisQuery extends PageQuery {
  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  siteId?: number;

  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  machineId?: number;

  @ApiPropertyOptional({ enum: AXIS_STATES })
  @IsOptional()
  @IsIn(AXIS_STATES)
  state?: AxisState;

  @ApiPropertyOptional({ enum: ACTUATORS })
  @IsOptional()
  @IsIn(ACTUATORS)
  actuator?: Actuator;

  @ApiPropertyOptional({ description: 'Part of the tag, the name or the machine' })
  @IsOptional()
  @IsString()
  @MaxLength(100)
  q?: string;
}

export class StripDto {
  @ApiProperty()
  id: number;

  @ApiProperty({
    description:
      'Per second: [s since 1970, peak following error mm, peak output %, % of moving time at the limit]',
    type: 'array',
    items: { type: 'array', items: { type: 'number' } },
  })
  seconds: [number, number, number, number][];
}

export class StripsDto {
  @ApiProperty({ type: [StripDto] })
  items: StripDto[];

  @NullableText()
  nextCursor: string | null;
}

export class FleetSummaryDto {
  @ApiProperty({ description: 'Axes by state', type: 'object', additionalProperties: { type: 'number' } })
  counts: Record<string, number>;

  @ApiProperty()
  unacknowledgedAlerts: number;

  @ApiProperty()
  acknowledgedAlerts: number;

  @ApiProperty()
  openProposals: number;
}
