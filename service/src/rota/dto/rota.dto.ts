import { applyDecorators } from '@nestjs/common';
import { ApiProperty, ApiPropertyOptional, OmitType } from '@nestjs/swagger';
import { Transform, Type } from 'class-transformer';
import {
  ArrayMaxSize,
  ArrayMinSize,
  ArrayUnique,
  IsArray,
  IsBoolean,
  IsInt,
  IsISO8601,
  IsNotEmpty,
  IsObject,
  IsOptional,
  IsString,
  Matches,
  Max,
  MaxLength,
  Min,
  ValidateIf,
  ValidateNested,
} from 'class-validator';
import { NullableText, NullableTime, PageOf } from '../../page.js';

const trimmed = () =>
  Transform(({ value }: { value: unknown }) => (typeof value === 'string' ? value.trim() : value));

export class RotaQueryDto {
  @ApiProperty()
  @Type(() => Number)
  @IsInt()
  siteId: number;
}

const TIME_OF_DAY = /^([01]\d|2[0-3]):[0-5]\d$/;
const IsTimeOfDay = () => Matches(TIME_OF_DAY, { message: '$property must be a time of day such as 06:00' });
const IsDay = () =>
  applyDecorators(
    Matches(/^\d{4}-\d{2}-\d{2}$/, { message: '$property must be a day such as 2026-11-30' }),
    IsISO8601({ strict: true }, { message: '$property must be a day that exists' }),
  );

export class HoursDto {
  @ApiProperty({ example: '08:00', description: "On the site's clock" })
  @IsTimeOfDay()
  from: string;

  @ApiProperty({ example: '17:00', description: 'No later than `from`: on the next day' })
  @IsTimeOfDay()
  to: string;
}

export class SetLayerDto {
  @ApiProperty({ example: 'Weekends' })
  @trimmed()
  @IsString()
  @IsNotEmpty()
  @MaxLength(60)
  name: string;

  @ApiProperty({ type: [Number], description: 'Ids of people, in the order of their turns' })
  @IsArray()
  @ArrayMinSize(1)
  @ArrayMaxSize(100)
  @IsInt({ each: true })
  members: number[];

  @ApiProperty({ example: '06:00', description: "On the site's clock" })
  @IsTimeOfDay()
  handOverTime: string;

  @ApiProperty({ minimum: 1, maximum: 60 })
  @IsInt()
  @Min(1)
  @Max(60)
  rotationDays: number;

  @ApiProperty({ example: '2026-11-30', description: 'The first turn begins at hand-over on this day' })
  @IsDay()
  startDate: string;

  @ApiPropertyOptional({
    type: String,
    nullable: true,
    description: 'The last turn ends at hand-over on this day; null while it goes on',
  })
  @IsOptional()
  @IsDay()
  endDate: string | null = null;

  @ApiPropertyOptional({
    type: [Number],
    default: [1, 2, 3, 4, 5, 6, 7],
    description: 'Days of the week on which the layer holds (ISO 8601: Monday is 1, Sunday is 7)',
  })
  @IsOptional()
  @IsArray()
  @ArrayMinSize(1)
  @ArrayUnique()
  @IsInt({ each: true })
  @Min(1, { each: true })
  @Max(7, { each: true })
  weekdays: number[] = [1, 2, 3, 4, 5, 6, 7];

  @ApiPropertyOptional({
    type: HoursDto,
    nullable: true,
    description: 'Hours of these days in which the layer holds; null for the whole day',
  })
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => HoursDto)
  hours: HoursDto | null = null;
}

export class SetLayersDto {
  @ApiProperty({
    type: [SetLayerDto],
    description: 'The lowest first: where two hold at once, the later in this list counts',
  })
  @IsArray()
  @ArrayMaxSize(10)
  @IsObject({ each: true })
  @ValidateNested({ each: true })
  @Type(() => SetLayerDto)
  layers: SetLayerDto[];
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

export class LayerDto extends OmitType(SetLayerDto, ['members', 'endDate', 'weekdays', 'hours']) {
  @ApiProperty({ type: [RotaMemberDto] })
  members: RotaMemberDto[];

  @NullableText('The last turn ends at hand-over on this day')
  endDate: string | null;

  @ApiProperty({ type: [Number], description: 'ISO 8601: Monday is 1, Sunday is 7' })
  weekdays: number[];

  @ApiProperty({ type: HoursDto, nullable: true })
  hours: HoursDto | null;
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

  @ApiProperty({ description: 'Somebody stands in: not by a layer' })
  override: boolean;

  @ApiProperty({ type: String, nullable: true, description: 'Name of the layer; null for an override' })
  layer: string | null;
}

export class GapDto {
  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;
}

export class AskSwapDto {
  @ApiProperty({ description: 'Who is to take over' })
  @IsInt()
  askedOfId: number;

  @ApiProperty({ format: 'date-time', description: 'A time in which you are on call' })
  @IsISO8601({ strict: true, strictSeparator: true })
  from: string;

  @ApiProperty({ format: 'date-time' })
  @IsISO8601({ strict: true, strictSeparator: true })
  to: string;

  @ApiPropertyOptional({ format: 'date-time', description: 'A time of theirs that you take in return' })
  @ValidateIf(({ returnFrom, returnTo }: AskSwapDto) => returnFrom !== undefined || returnTo !== undefined)
  @IsISO8601({ strict: true, strictSeparator: true })
  returnFrom?: string;

  @ApiPropertyOptional({ format: 'date-time' })
  @ValidateIf(({ returnFrom, returnTo }: AskSwapDto) => returnFrom !== undefined || returnTo !== undefined)
  @IsISO8601({ strict: true, strictSeparator: true })
  returnTo?: string;

  @ApiProperty()
  @trimmed()
  @IsString()
  @IsNotEmpty()
  @MaxLength(500)
  reason: string;
}

export class SwapDto {
  @ApiProperty()
  id: number;

  @ApiProperty({ type: RotaMemberDto })
  askedBy: RotaMemberDto;

  @ApiProperty({ type: RotaMemberDto })
  askedOf: RotaMemberDto;

  @ApiProperty({ format: 'date-time' })
  from: string;

  @ApiProperty({ format: 'date-time' })
  to: string;

  @ApiProperty({ type: GapDto, nullable: true, description: 'What the asking one takes in return' })
  inReturn: GapDto | null;

  @ApiProperty()
  reason: string;
}

export class MakeFeedDto {
  @ApiProperty({ description: "Only the person's own shifts, or everybody's and the gaps" })
  @IsBoolean()
  own: boolean;
}

export class NewFeedDto {
  @ApiProperty()
  id: number;

  @ApiProperty({ description: 'The private address, shown this once' })
  url: string;
}

export class FeedDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  siteId: number;

  @ApiProperty()
  siteName: string;

  @ApiProperty()
  own: boolean;

  @ApiProperty({ format: 'date-time' })
  createdAt: string;

  @NullableTime('When a calendar program last read it')
  lastReadAt: string | null;
}

export class FeedsDto extends PageOf(FeedDto, 'FeedsPageDto') {}

export class RotaSpanQuery {
  @ApiPropertyOptional({ format: 'date-time', description: 'Now where not given' })
  @IsOptional()
  @IsISO8601({ strict: true, strictSeparator: true })
  from?: string;

  @ApiPropertyOptional({ format: 'date-time', description: '28 days later where not given; within 400 days' })
  @IsOptional()
  @IsISO8601({ strict: true, strictSeparator: true })
  to?: string;
}

export class RotaFileDto {
  @ApiProperty({
    type: 'string',
    format: 'binary',
    description: 'CSV with the columns from, to, email and, if wanted, reason',
  })
  file: unknown;
}

export class RotaImportDto {
  @ApiProperty({ description: 'Overrides that were added' })
  added: number;

  @ApiProperty({ description: 'Lines that said what was so already' })
  alreadyThere: number;
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

  @ApiProperty({ type: [LayerDto], description: 'The lowest first: a later one counts over an earlier' })
  layers: LayerDto[];

  @ApiProperty({ type: [OverrideDto], description: 'That are not over' })
  overrides: OverrideDto[];

  @ApiProperty({ type: [SwapDto], description: 'That wait for an answer' })
  swaps: SwapDto[];

  @ApiProperty({ type: [RotaMemberDto], description: 'Who can be on call on this site' })
  available: RotaMemberDto[];

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
