import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { IsISO8601, IsOptional } from 'class-validator';
import { ALERT_STATES, PRIORITIES, type AlertState, type Priority } from '../../alerts/alert.entity.js';
import { AXIS_STATES, type AxisState } from '../../fleet/axis.entity.js';
import { NullableText, NullableTime } from '../../page.js';
import { NoteDto, OnCallDto } from '../../rota/dto/rota.dto.js';

export class HandOverQuery {
  @ApiPropertyOptional({ format: 'date-time', description: 'Begin of the present shift where not given' })
  @IsOptional()
  @IsISO8601({ strict: true, strictSeparator: true })
  from?: string;
}

export class HandOverAlertDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  axisTag: string;

  @ApiProperty()
  title: string;

  @ApiProperty({ enum: PRIORITIES })
  priority: Priority;

  @ApiProperty({ enum: ALERT_STATES })
  state: AlertState;

  @ApiProperty({ format: 'date-time' })
  raisedAt: string;

  @ApiProperty()
  message: string;

  @ApiProperty({ description: 'What to do' })
  action: string;

  @NullableText()
  acknowledgedBy: string | null;

  @NullableTime()
  shelvedUntil: string | null;

  @NullableText()
  shelveReason: string | null;
}

export class HandOverAxisDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  tag: string;

  @ApiProperty()
  name: string;

  @ApiProperty({ enum: AXIS_STATES })
  state: AxisState;

  @ApiProperty()
  stateReason: string;
}

export class HandOverChangeDto {
  @ApiProperty({ format: 'date-time' })
  at: string;

  @ApiProperty()
  by: string;

  @ApiProperty({ example: 'proposal.applied' })
  action: string;

  @ApiProperty({ description: 'What it was done to, such as "axis CU-03 feed"' })
  subject: string;

  @NullableText()
  note: string | null;
}

export class HandOverDto {
  @ApiProperty()
  siteId: number;

  @ApiProperty()
  siteName: string;

  @ApiProperty({ example: 'Europe/London' })
  timeZone: string;

  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;

  @ApiProperty({ type: OnCallDto, nullable: true })
  onCall: OnCallDto | null;

  @ApiProperty({ type: OnCallDto, nullable: true, description: 'Who comes after; null: nobody' })
  next: OnCallDto | null;

  @ApiProperty({ type: [HandOverAlertDto], description: 'That are not over' })
  open: HandOverAlertDto[];

  @ApiProperty({ type: [HandOverAlertDto], description: 'That came in the shift and are over' })
  over: HandOverAlertDto[];

  @ApiProperty({ type: [HandOverAxisDto], description: 'That are not in tune now' })
  axes: HandOverAxisDto[];

  @ApiProperty({ type: [HandOverChangeDto], description: 'What people and the service changed in the shift' })
  changes: HandOverChangeDto[];

  @ApiProperty({ type: [NoteDto] })
  notes: NoteDto[];
}
