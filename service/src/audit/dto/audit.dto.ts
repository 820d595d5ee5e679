import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsInt, IsOptional, IsString, Max, MaxLength, Min } from 'class-validator';

export class AuditScopeDto {
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
}

export class AuditQueryDto extends AuditScopeDto {
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

class BrokenEntryDto {
  @ApiProperty({ description: 'As it reads now; it may be what was altered' })
  at: string;

  @ApiProperty()
  actor: string;

  @ApiProperty()
  action: string;

  @ApiProperty()
  subjectType: string;

  @ApiProperty()
  subjectId: string;
}

export class AuditChainDto {
  @ApiProperty({ description: 'Good entries from the first one on' })
  entries: number;

  @ApiProperty()
  intact: boolean;

  @ApiProperty({
    type: Number,
    nullable: true,
    description: 'The first entry that was altered or does not follow',
  })
  brokenAt: number | null;

  @ApiProperty({ type: String, nullable: true, description: 'What is wrong there, in words' })
  reason: string | null;

  @ApiProperty({
    type: BrokenEntryDto,
    nullable: true,
    description: 'null when it is gone, or another site’s',
  })
  broken: BrokenEntryDto | null;

  @ApiProperty({ description: 'SHA-256 of the last good entry' })
  head: string;
}
