import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsInt, IsOptional, IsString, Max, MaxLength, Min } from 'class-validator';

export class AuditQueryDto {
  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  siteId?: number;

  @ApiPropertyOptional({ example: 'axis' })
  @IsOptional()
  @IsString()
  @MaxLength(50)
  subjectType?: string;

  @ApiPropertyOptional()
  @IsOptional()
  @IsString()
  @MaxLength(100)
  subjectId?: string;

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

export class AuditEntryDto {
  @ApiProperty()
  id: number;

  @ApiProperty({ format: 'date-time' })
  at: string;

  @ApiProperty({ description: 'Name at the time, or "Polewright"' })
  actor: string;

  @ApiProperty({ type: Number, nullable: true })
  userId: number | null;

  @ApiProperty({ example: 'proposal.approve' })
  action: string;

  @ApiProperty({ example: 'proposal' })
  subjectType: string;

  @ApiProperty()
  subjectId: string;

  @ApiProperty({ type: Number, nullable: true })
  siteId: number | null;

  @ApiProperty({ type: String, nullable: true })
  note: string | null;

  @ApiProperty({ type: Object, nullable: true, description: 'What it was, where something was changed' })
  before: unknown;

  @ApiProperty({ type: Object, nullable: true, description: 'What it became' })
  after: unknown;
}

export class AuditPageDto {
  @ApiProperty({ type: [AuditEntryDto] })
  items: AuditEntryDto[];

  @ApiProperty({ type: String, nullable: true })
  nextCursor: string | null;
}

export class AuditChainDto {
  @ApiProperty()
  entries: number;

  @ApiProperty()
  intact: boolean;

  @ApiProperty({
    type: Number,
    nullable: true,
    description: 'The first entry that was altered or does not follow',
  })
  brokenAt: number | null;

  @ApiProperty({ description: 'SHA-256 of the last good entry' })
  head: string;
}
