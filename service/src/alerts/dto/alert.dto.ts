import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  IsDate,
  IsIn,
  IsInt,
  IsNotEmpty,
  IsNumber,
  IsOptional,
  IsString,
  Max,
  MaxLength,
  Min,
} from 'class-validator';
import { MayBeLeftOut, NullableNumber, NullableText, NullableTime, PageOf, PageQuery } from '../../page.js';
import { ALERT_STATES, PRIORITIES, type Alert, type AlertState, type Priority } from '../alert.entity.js';
import type { Marks } from '../alert-marks.service.js';
import { RULE, RULES, RULE_TITLES, type RuleName } from '../rules.js';

export class AlertEventDto {
  @ApiProperty()
  at: Date;

  @ApiProperty({ description: 'A person’s name, or "service"' })
  by: string;

  @ApiProperty()
  action: string;

  @NullableText()
  note: string | null;
}

export class AlertDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  siteId: number;

  @ApiProperty()
  siteName: string;

  @ApiProperty()
  timeZone: string;

  @ApiProperty()
  machineName: string;

  @ApiProperty()
  axisId: number;

  @ApiProperty()
  axisTag: string;

  @ApiProperty()
  axisName: string;

  @ApiProperty({ enum: RULES })
  rule: RuleName;

  @ApiProperty({ description: 'The rule in plain words' })
  title: string;

  @ApiProperty({ enum: PRIORITIES })
  priority: Priority;

  @ApiProperty({ enum: ALERT_STATES })
  state: AlertState;

  @ApiProperty()
  raisedAt: Date;

  @NullableTime()
  acknowledgedAt: Date | null;

  @NullableText()
  acknowledgedBy: string | null;

  @NullableTime('When the rule’s condition went away')
  returnedAt: Date | null;

  @NullableTime()
  shelvedUntil: Date | null;

  @NullableText()
  shelvedBy: string | null;

  @NullableText()
  shelveReason: string | null;

  @ApiProperty()
  value: number;

  @ApiProperty()
  threshold: number;

  @ApiProperty()
  unit: string;

  @ApiProperty()
  message: string;

  @ApiProperty({ description: 'What to do' })
  action: string;

  @NullableTime('When the next person is told unless somebody acknowledges')
  nextStepAt: Date | null;

  @NullableText('What happens when nobody does anything')
  consequence: string | null;

  @NullableTime('By when somebody should respond; null once somebody has, or where nothing is said')
  respondBy: Date | null;

  @NullableText('Why it is suppressed')
  suppressedBecause: string | null;

  @NullableText()
  outOfServiceBy: string | null;

  @NullableText()
  outOfServiceReason: string | null;

  @NullableTime('Since when its level cannot be measured')
  levelUnknownSince: Date | null;

  @ApiProperty({ description: 'It comes and goes: its deadband or delays are too small' })
  chattering: boolean;

  @ApiProperty({ description: 'It has stood for more than a day' })
  stale: boolean;

  @NullableNumber('The axis’s open proposal')
  proposalId: number | null;

  @ApiProperty({ type: [AlertEventDto], description: 'Oldest first' })
  events: AlertEventDto[];

  static of(alert: Alert, proposalId: number | null, marks: Marks): AlertDto {
    const { axis } = alert;
    return {
      id: alert.id,
      siteId: alert.siteId,
      siteName: axis.site.name,
      timeZone: axis.site.timeZone,
      machineName: axis.machine.name,
      axisId: alert.axisId,
      axisTag: axis.tag,
      axisName: axis.name,
      rule: alert.rule,
      title: RULE_TITLES[alert.rule],
      priority: alert.priority,
      state: alert.state,
      raisedAt: alert.raisedAt,
      acknowledgedAt: alert.acknowledgedAt,
      acknowledgedBy: alert.acknowledgedBy,
      returnedAt: alert.returnedAt,
      shelvedUntil: alert.shelvedUntil,
      shelvedBy: alert.shelvedBy,
      shelveReason: alert.shelveReason,
      value: alert.value,
      threshold: alert.threshold,
      unit: RULE[alert.rule].unit,
      message: alert.message,
      action: alert.action,
      nextStepAt: alert.nextStepAt,
      consequence: alert.consequence,
      respondBy:
        alert.state === 'unacknowledged' && alert.respondWithin !== null
          ? new Date((alert.standsSince ?? alert.raisedAt).getTime() + alert.respondWithin * 1000)
          : null,
      suppressedBecause: alert.suppressedBecause,
      outOfServiceBy: alert.outOfServiceBy,
      outOfServiceReason: alert.outOfServiceReason,
      ...marks,
      proposalId,
      events: [...alert.events]
        .sort((a, b) => a.id - b.id)
        .map(({ at, by, action, note }) => ({ at, by, action, note })),
    };
  }
}

export class AlertPageDto extends PageOf(AlertDto, 'AlertPageDto') {}

export class AlertQuery extends PageQuery {
  @ApiPropertyOptional({
    enum: ['open', ...ALERT_STATES],
    default: 'open',
    description: '"open" is everything that is not over',
  })
  @IsOptional()
  @IsIn(['open', ...ALERT_STATES])
  state: AlertState | 'open' = 'open';

  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  axisId?: number;

  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  siteId?: number;
}

export class AcknowledgeDto {
  @ApiPropertyOptional({ maxLength: 2000 })
  @IsOptional()
  @IsString()
  @MaxLength(2000)
  note?: string;
}

export class AlertNoteDto {
  @ApiProperty({ maxLength: 2000 })
  @IsString()
  @IsNotEmpty()
  @MaxLength(2000)
  note: string;
}

export class ShelveDto {
  @ApiProperty({ description: 'A shelf always ends: at most 30 days from now' })
  @Type(() => Date)
  @IsDate()
  until: Date;

  @ApiProperty({ maxLength: 2000 })
  @IsString()
  @IsNotEmpty()
  @MaxLength(2000)
  reason: string;
}

export class OutOfServiceDto {
  @ApiProperty({ maxLength: 2000 })
  @IsString()
  @IsNotEmpty()
  @MaxLength(2000)
  reason: string;
}

export class AlertRuleDto {
  @ApiProperty({ enum: RULES })
  rule: RuleName;

  @ApiProperty()
  title: string;

  @ApiProperty({ description: 'Unit of what the rule measures' })
  unit: string;

  @ApiProperty({ description: 'Whether threshold and deadband are shares of the axis’s own tolerance' })
  relative: boolean;

  @ApiProperty()
  threshold: number;

  @ApiProperty()
  deadband: number;

  @ApiProperty({ description: 's' })
  onDelay: number;

  @ApiProperty({ description: 's' })
  offDelay: number;

  @ApiProperty({ enum: PRIORITIES })
  priority: Priority;

  @ApiProperty({ description: 's without acknowledgement until the first mail' })
  mailAfter: number;

  @ApiProperty({ description: 's for which the level must be unknown before its alert counts as over' })
  unknownAfter: number;

  @ApiProperty({ description: 's in which somebody should respond' })
  respondWithin: number;

  @ApiProperty({ description: 'What happens when nobody does anything' })
  consequence: string;

  @NullableText('What to do; null: as worked out from the evidence')
  whatToDo: string | null;
}

export class AlertRulesDto {
  @ApiProperty({ type: [AlertRuleDto] })
  items: AlertRuleDto[];

  @NullableText()
  nextCursor: string | null;
}

export class ChangeAlertRuleDto {
  @ApiPropertyOptional({ minimum: 0 })
  @MayBeLeftOut()
  @IsNumber()
  @Min(0)
  threshold?: number;

  @ApiPropertyOptional({ minimum: 0 })
  @MayBeLeftOut()
  @IsNumber()
  @Min(0)
  deadband?: number;

  @ApiPropertyOptional({ minimum: 0, maximum: 86400 })
  @MayBeLeftOut()
  @IsInt()
  @Min(0)
  @Max(86_400)
  onDelay?: number;

  @ApiPropertyOptional({ minimum: 0, maximum: 86400 })
  @MayBeLeftOut()
  @IsInt()
  @Min(0)
  @Max(86_400)
  offDelay?: number;

  @ApiPropertyOptional({ enum: PRIORITIES })
  @MayBeLeftOut()
  @IsIn(PRIORITIES)
  priority?: Priority;

  @ApiPropertyOptional({ minimum: 0, maximum: 86400 })
  @MayBeLeftOut()
  @IsInt()
  @Min(0)
  @Max(86_400)
  mailAfter?: number;

  @ApiPropertyOptional({ minimum: 60, maximum: 2592000 })
  @MayBeLeftOut()
  @IsInt()
  @Min(60)
  @Max(2_592_000)
  unknownAfter?: number;

  @ApiPropertyOptional({ minimum: 60, maximum: 2592000 })
  @MayBeLeftOut()
  @IsInt()
  @Min(60)
  @Max(2_592_000)
  respondWithin?: number;

  @ApiPropertyOptional({ maxLength: 500 })
  @MayBeLeftOut()
  @IsString()
  @IsNotEmpty()
  @MaxLength(500)
  consequence?: string;

  @ApiPropertyOptional({ type: String, nullable: true, maxLength: 500 })
  @IsOptional()
  @IsString()
  @IsNotEmpty()
  @MaxLength(500)
  whatToDo?: string | null;
}
