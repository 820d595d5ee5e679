import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { IsInt, IsString, Matches } from 'class-validator';
import { MayBeLeftOut, NullableTime, NullableNumber, NullableText } from '../../page.js';
import { RETENTION_KINDS, type RetentionKind } from '../retention.js';

export class RetentionDto {
  @ApiProperty({ enum: RETENTION_KINDS })
  kind: RetentionKind;

  @ApiProperty({ description: 'What is kept, in plain words' })
  title: string;

  @ApiProperty({ description: 's' })
  keptSeconds: number;

  @ApiProperty({ description: 's' })
  defaultSeconds: number;

  @ApiProperty({ description: 's' })
  leastSeconds: number;

  @ApiProperty({ description: 's' })
  mostSeconds: number;
}

/** What is left out stays as it is. */
export class ChangeRetentionDto implements Partial<Record<RetentionKind, number>> {
  @ApiPropertyOptional({ description: 's' })
  @MayBeLeftOut()
  @IsInt()
  seconds?: number;

  @ApiPropertyOptional({ description: 's' })
  @MayBeLeftOut()
  @IsInt()
  minutes?: number;

  @ApiPropertyOptional({ description: 's' })
  @MayBeLeftOut()
  @IsInt()
  hours?: number;

  @ApiPropertyOptional({ description: 's' })
  @MayBeLeftOut()
  @IsInt()
  estimates?: number;

  @ApiPropertyOptional({ description: 's' })
  @MayBeLeftOut()
  @IsInt()
  alertCaptures?: number;
}

export class TableSizeDto {
  @ApiProperty({ description: 'The table’s name, or "capture files"' })
  name: string;

  @ApiProperty()
  rows: number;

  @ApiProperty({ description: 'Of its pages and its indices’ pages' })
  bytes: number;

  @NullableNumber('Rows that it gets a day, less what is deleted; null until a day was measured')
  rowsPerDay: number | null;

  @NullableNumber('How long its rows are kept, s; null without end')
  keptSeconds: number | null;

  @NullableTime('Time of its oldest row, of tables that are kept for a time')
  oldest: Date | null;
}

export const FORECASTS = [
  'not-enough-history',
  'not-within-ten-years',
  'full-at',
  'backups-do-not-fit',
] as const;

export class ForecastDto {
  @ApiProperty({ enum: FORECASTS })
  outcome: (typeof FORECASTS)[number];

  @NullableTime('First measurement that it rests on')
  since: Date | null;

  @NullableNumber('Bytes that the database and the captures get in the next day')
  bytesPerDay: number | null;

  @NullableTime('When the disk is full, with all backups that are kept; only with "full-at"')
  fullAt: Date | null;

  @NullableNumber('Whole days until then; only with "full-at"')
  fullInDays: number | null;
}

export class IntegrityDto {
  @ApiProperty()
  at: Date;

  @NullableText('What is wrong, in plain words; null when it is whole')
  fault: string | null;
}

export class BackupDto {
  @ApiProperty({ example: 'polewright-2026-11-30T06-00-00.sqlite' })
  name: string;

  @ApiProperty()
  at: Date;

  @ApiProperty()
  bytes: number;

  @ApiProperty({ type: IntegrityDto, nullable: true, description: 'null until it was checked' })
  integrity: IntegrityDto | null;
}

export class BackupFailureDto {
  @ApiProperty()
  at: Date;

  @ApiProperty({ description: 'In plain words' })
  why: string;
}

export class BackupsDto {
  @ApiProperty({ type: [BackupDto], description: 'Newest first' })
  items: BackupDto[];

  @ApiProperty({ description: 'Days of which the newest one is kept' })
  kept: number;

  @ApiProperty({ description: 'Bytes of disk that the next one needs' })
  neededBytes: number;

  @NullableNumber('Share of the one that is being made, 0 to 1')
  progress: number | null;

  @ApiProperty({ type: BackupFailureDto, nullable: true, description: 'Why the last attempt made none' })
  failure: BackupFailureDto | null;
}

export class StorageDto {
  @ApiProperty({ description: 'Bytes that may still be written to the data folder' })
  freeBytes: number;

  @ApiProperty({ description: 'Bytes of its file system' })
  totalBytes: number;

  @ApiProperty({ description: 'Bytes of the database file and its log' })
  databaseBytes: number;

  @ApiProperty({ description: 'Bytes inside the file that deleted rows left and new ones fill' })
  reusableBytes: number;

  @NullableTime('When the tables were last measured')
  measuredAt: Date | null;

  @ApiProperty({ description: 'Whether they are being measured now' })
  measuring: boolean;

  @ApiProperty({ type: [TableSizeDto], description: 'Largest first' })
  tables: TableSizeDto[];

  @ApiProperty()
  forecast: ForecastDto;

  @ApiProperty({ type: [RetentionDto] })
  retention: RetentionDto[];

  @ApiProperty({ description: 'Whether this person may change how long is kept' })
  mayChangeRetention: boolean;

  @ApiProperty()
  backups: BackupsDto;

  @ApiProperty({
    type: IntegrityDto,
    nullable: true,
    description: 'Of the database; null until it was checked',
  })
  integrity: IntegrityDto | null;

  @ApiProperty({ type: [String], description: 'What is being checked: "database" or names of backups' })
  checking: string[];
}

export class CheckDto {
  @ApiProperty({ description: '"database", or the name of a backup', example: 'database' })
  @IsString()
  @Matches(/^(database|polewright-[\dT-]+\.sqlite)$/, {
    message: 'must be "database" or the name of a backup',
  })
  subject: string;
}
