import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsInt, IsOptional, Max, Min } from 'class-validator';
import { ALERT_STATES, PRIORITIES, type AlertState, type Priority } from '../../alerts/alert.entity.js';
import { NullableNumber } from '../../page.js';
import { LOADS, type Load } from '../rates.js';

export class RatesQuery {
  @ApiProperty()
  @Type(() => Number)
  @IsInt()
  siteId: number;

  @ApiPropertyOptional({ default: 30, minimum: 1, maximum: 92 })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  @Min(1)
  @Max(92)
  days: number = 30;
}

export class DayRateDto {
  @ApiProperty({ example: '2026-11-30', description: "On the site's calendar" })
  date: string;

  @ApiProperty()
  alerts: number;
}

export class PersonRateDto {
  @NullableNumber('null: nobody was on call')
  userId: number | null;

  @ApiProperty()
  name: string;

  @ApiProperty()
  hoursOnCall: number;

  @ApiProperty()
  alerts: number;

  @ApiProperty({ description: 'Alerts in 24 hours on call' })
  perDay: number;

  @ApiProperty({ description: "Most alerts on one day of the site's calendar" })
  busiestDay: number;

  @ApiProperty({ enum: LOADS, description: 'Of the busiest day, by the published figures' })
  load: Load;
}

export class FloodDto {
  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;

  @ApiProperty()
  alerts: number;
}

export class FrequentAlertDto {
  @ApiProperty()
  axisId: number;

  @ApiProperty()
  axisTag: string;

  @ApiProperty()
  title: string;

  @ApiProperty()
  alerts: number;

  @ApiProperty({ description: 'Of all alerts of the time' })
  sharePct: number;

  @ApiProperty({ description: 'Came three times or more within a minute' })
  chattering: boolean;
}

export class StandingAlertDto {
  @ApiProperty()
  alertId: number;

  @ApiProperty()
  axisTag: string;

  @ApiProperty()
  title: string;

  @ApiProperty({ enum: ALERT_STATES })
  state: AlertState;

  @ApiProperty({ format: 'date-time' })
  raisedAt: string;
}

export class AcknowledgeTimeDto {
  @ApiProperty({ enum: PRIORITIES })
  priority: Priority;

  @ApiProperty()
  alerts: number;

  @ApiProperty({ description: 'That nobody acknowledged' })
  unanswered: number;

  @NullableNumber('s; half of those acknowledged waited no longer')
  medianSeconds: number | null;

  @NullableNumber('s; nine of ten of those acknowledged waited no longer')
  ninthDecileSeconds: number | null;
}

export class PublishedFiguresDto {
  @ApiProperty()
  acceptablePerDay: number;

  @ApiProperty()
  manageablePerDay: number;

  @ApiProperty({ description: 'More alerts than this in ten minutes are a flood' })
  floodAlerts: number;

  @ApiProperty()
  source: string;
}

export class RatesDto {
  @ApiProperty()
  siteId: number;

  @ApiProperty({ example: 'Europe/London' })
  timeZone: string;

  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;

  @ApiProperty({ description: 'Alerts that were raised' })
  alerts: number;

  @ApiProperty()
  perDay: number;

  @ApiProperty({ type: [DayRateDto] })
  days: DayRateDto[];

  @ApiProperty({ type: [PersonRateDto] })
  people: PersonRateDto[];

  @ApiProperty({ type: [FloodDto] })
  floods: FloodDto[];

  @ApiProperty({ description: 'Of the time' })
  floodPct: number;

  @ApiProperty({ type: [FrequentAlertDto], description: 'The ten that came most often' })
  frequent: FrequentAlertDto[];

  @ApiProperty({ type: [FrequentAlertDto], description: 'That came three times or more within a minute' })
  chattering: FrequentAlertDto[];

  @ApiProperty({ type: [StandingAlertDto], description: 'That stand for more than a day' })
  standing: StandingAlertDto[];

  @ApiProperty({ type: [AcknowledgeTimeDto] })
  acknowledging: AcknowledgeTimeDto[];

  @ApiProperty({ type: PublishedFiguresDto })
  published: PublishedFiguresDto;
}
