import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsIn, IsInt, IsOptional, Max, Min } from 'class-validator';
import { CHANNELS, MAIL_STATES, type Channel, type MailState } from '../mail.entity.js';

export class MailQueryDto {
  @ApiPropertyOptional({ enum: MAIL_STATES })
  @IsOptional()
  @IsIn(MAIL_STATES)
  state?: MailState;

  @ApiPropertyOptional({ default: 50, minimum: 1, maximum: 200 })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  @Min(1)
  @Max(200)
  limit: number = 50;

  @ApiPropertyOptional({ type: String, description: 'nextCursor of the page before' })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  cursor?: number;
}

export class MailDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  to: string;

  @ApiProperty()
  subject: string;

  @ApiProperty({ enum: MAIL_STATES })
  state: MailState;

  @ApiProperty()
  attempts: number;

  @ApiProperty({ format: 'date-time' })
  createdAt: string;

  @ApiProperty({ type: String, format: 'date-time', nullable: true })
  sentAt: string | null;

  @ApiProperty({ type: String, nullable: true, description: 'What the mail server answered last' })
  error: string | null;

  @ApiProperty({ type: Number, nullable: true })
  alertId: number | null;

  @ApiProperty({ enum: CHANNELS })
  channel: Channel;

  @ApiProperty({ description: 'The service was stopped while it went out: it may have gone out twice' })
  perhapsAgain: boolean;

  @ApiProperty({ type: Number, nullable: true, description: 'The mail in which it went out with others' })
  groupId: number | null;
}

export class MailPageDto {
  @ApiProperty({ type: [MailDto] })
  items: MailDto[];

  @ApiProperty({ type: String, nullable: true })
  nextCursor: string | null;
}

export class DemoMessageDto {
  @ApiProperty()
  id: string;

  @ApiProperty({ format: 'date-time' })
  at: string;

  @ApiProperty()
  from: string;

  @ApiProperty()
  to: string;

  @ApiProperty()
  subject: string;

  @ApiProperty()
  text: string;

  @ApiProperty()
  html: string;
}

export class DemoInboxDto {
  @ApiProperty({ type: [DemoMessageDto] })
  items: DemoMessageDto[];
}
