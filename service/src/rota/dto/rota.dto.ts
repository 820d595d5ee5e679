import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Transform, Type } from 'class-transformer';
import {
  ArrayMaxSize,
  ArrayMinSize,
  IsArray,
  IsInt,
  IsISO8601,
  IsNotEmpty,
  IsOptional,
  IsString,
  Matches,
  Max,
  MaxLength,
  Min,
} from 'class-validator';

const trimmed = () =>
  Transform(({ value }: { value: unknown }) => (typeof value === 'string' ? value.trim() : value));

export class RotaQueryDto {
  @ApiProperty()
  @Type(() => Number)
  @IsInt()
  siteId: number;
}

export class SetRotationDto {
  @ApiProperty({ type: [Number], description: 'Ids of people, in the order of their turns' })
  @IsArray()
  @ArrayMinSize(1)
  @ArrayMaxSize(100)
  @IsInt({ each: true })
  members: number[];

  @ApiProperty({ example: '06:00', description: "On the site's clock" })
  @IsString()
  @Matches(/^([01]\d|2[0-3]):[0-5]\d$/, { message: 'handOverTime must be a time of day such as 06:00' })
  handOverTime: string;

  @ApiProperty({ minimum: 1, maximum: 60 })
  @IsInt()
  @Min(1)
  @Max(60)
  rotationDays: number;

  @ApiProperty({ example: '2026-11-30', description: 'The first turn begins at hand-over on this day' })
  @Matches(/^\d{4}-\d{2}-\d{2}$/, { message: 'startDate must be a day such as 2026-11-30' })
  @IsISO8601({ strict: true }, { message: 'startDate must be a day that exists' })
  startDate: string;
}

export class AddOverrideDto {
  @ApiProperty()
  @IsInt()
  userId: number;

  @ApiProperty({ format: 'date-time' })
  @IsISO8601({ strict: true, strictSeparator: true })
  from: string;

  @ApiProperty({ format: 'date-time' })
  @IsISO8601({ strict: true, strictSeparator: true })
  to: string;

  @ApiProperty()
  @trimmed()
  @IsString()
  @IsNotEmpty()
  @MaxLength(500)
  reason: string;
}

export class AddNoteDto {
  @ApiProperty()
  @trimmed()
  @IsString()
  @IsNotEmpty()
  @MaxLength(4_000)
  text: string;
}

export class NotesQueryDto {
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

export class RotaMemberDto {
  @ApiProperty()
  userId: number;

  @ApiProperty()
  name: string;
}

export class RotationDto {
  @ApiProperty({ type: [RotaMemberDto] })
  members: RotaMemberDto[];

  @ApiProperty({ example: '06:00' })
  handOverTime: string;

  @ApiProperty()
  rotationDays: number;

  @ApiProperty({ example: '2026-11-30' })
  startDate: string;
}

export class OverrideDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  userId: number;

  @ApiProperty()
  name: string;

  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;

  @ApiProperty()
  reason: string;
}

export class ShiftDto {
  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;

  @ApiProperty()
  userId: number;

  @ApiProperty()
  name: string;

  @ApiProperty({ description: 'Somebody stands in: not by the rotation' })
  override: boolean;
}

export class GapDto {
  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;
}

export class OnCallDto {
  @ApiProperty()
  userId: number;

  @ApiProperty()
  name: string;

  @ApiProperty()
  email: string;

  @ApiProperty({ format: 'date-time' })
  until: string;
}

export class RotaDto {
  @ApiProperty()
  siteId: number;

  @ApiProperty({ example: 'Europe/London' })
  timeZone: string;

  @ApiProperty({ type: RotationDto, nullable: true })
  layer: RotationDto | null;

  @ApiProperty({ type: [OverrideDto], description: 'That are not over' })
  overrides: OverrideDto[];

  @ApiProperty({ type: [ShiftDto], description: 'Of the next 14 days' })
  shifts: ShiftDto[];

  @ApiProperty({ type: OnCallDto, nullable: true })
  onCall: OnCallDto | null;

  @ApiProperty({ type: [GapDto], description: 'When nobody is on call, in the next 14 days' })
  gaps: GapDto[];
}

export class SiteOnCallDto {
  @ApiProperty()
  siteId: number;

  @ApiProperty()
  siteName: string;

  @ApiProperty({ example: 'Europe/London' })
  timeZone: string;

  @ApiProperty({ type: Number, nullable: true, description: 'null: nobody is on call' })
  userId: number | null;

  @ApiProperty({ type: String, nullable: true })
  name: string | null;

  @ApiProperty({ type: String, format: 'date-time', nullable: true })
  until: string | null;
}

export class SitesOnCallDto {
  @ApiProperty({ type: [SiteOnCallDto] })
  items: SiteOnCallDto[];

  @ApiProperty({ type: String, nullable: true })
  nextCursor: string | null;
}

export class NoteDto {
  @ApiProperty()
  id: number;

  @ApiProperty({ format: 'date-time' })
  at: string;

  @ApiProperty({ description: 'Name of who wrote it' })
  by: string;

  @ApiProperty()
  text: string;
}

export class NotesDto {
  @ApiProperty({ type: [NoteDto] })
  items: NoteDto[];

  @ApiProperty({ type: String, nullable: true })
  nextCursor: string | null;
}
