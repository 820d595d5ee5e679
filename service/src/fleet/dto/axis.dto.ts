import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsIn, IsInt, IsOptional, IsString, MaxLength } from 'class-validator';
import { STRUCTURES, type Structure } from '../../control/pole-placement.js';
import { PatternDto } from '../../design/dto/pattern.dto.js';
import { NullableNumber, NullableTime, PageOf, PageQuery } from '../../page.js';
import { ALERT_STATES, type AlertState } from '../../alerts/alert.entity.js';
import { RULES, type RuleName } from '../../alerts/rules.js';
import { PROPOSAL_STATES, type ProposalState } from '../../proposals/proposal.entity.js';
import { ACTUATORS, AXIS_STATES, type Actuator, type AxisState } from '../axis.entity.js';
import { GainsDto, PlantDto, TolerancesDto, TravelDto, AxisMoveDto } from './axis-sheet.dto.js';
import { AxisEstimateDto, RatioPointDto } from './axis-estimate.dto.js';
import { MaintenanceStateDto } from './axis-care.dto.js';

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
