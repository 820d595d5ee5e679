import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsInt, IsNotEmpty, IsOptional, IsString, IsTimeZone, MaxLength } from 'class-validator';
import { NullableTime, PageOf, PageQuery } from '../../page.js';

export class CreateSiteDto {
  @ApiProperty()
  @IsString()
  @IsNotEmpty()
  @MaxLength(100)
  name: string;

  @ApiProperty({ description: 'IANA name', example: 'Europe/London' })
  @IsTimeZone()
  timeZone: string;
}

export class SiteDto extends CreateSiteDto {
  @ApiProperty()
  id: number;
}

export class SitePageDto extends PageOf(SiteDto, 'SitePageDto') {}

export class CreateMachineDto {
  @ApiProperty()
  @IsInt()
  siteId: number;

  @ApiProperty()
  @IsString()
  @IsNotEmpty()
  @MaxLength(100)
  name: string;
}

export class MachineDto extends CreateMachineDto {
  @ApiProperty()
  id: number;
}

export class MachinePageDto extends PageOf(MachineDto, 'MachinePageDto') {}

export class CreateGatewayDto extends CreateMachineDto {}

export class CreatedGatewayDto {
  @ApiProperty()
  id: number;

  @ApiProperty({ description: 'Shown this once; only its hash is kept' })
  token: string;
}

export class GatewayDto extends MachineDto {
  @ApiProperty()
  connected: boolean;

  @NullableTime()
  lastSeenAt: Date | null;
}

export class GatewayPageDto extends PageOf(GatewayDto, 'GatewayPageDto') {}

export class SiteQuery extends PageQuery {
  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  siteId?: number;
}
