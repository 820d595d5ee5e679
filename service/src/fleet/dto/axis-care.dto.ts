import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsBoolean, IsDate, IsIn, IsNotEmpty, IsOptional, IsString, MaxLength } from 'class-validator';
import { NullableText, NullableTime } from '../../page.js';

export class MaintenanceDto {
  @ApiProperty()
  @IsBoolean()
  on: boolean;

  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Date)
  @IsDate()
  until?: Date;

  @ApiProperty({ maxLength: 500 })
  @IsString()
  @IsNotEmpty()
  @MaxLength(500)
  reason: string;
}

export class ConfirmBaselineDto {
  @ApiProperty({ enum: [true] })
  @IsIn([true])
  confirm: true;
}

export class MaintenanceStateDto {
  @NullableTime()
  until: Date | null;

  @NullableText()
  reason: string | null;

  @NullableText()
  by: string | null;
}
