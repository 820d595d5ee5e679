import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { IsNotEmpty, IsOptional, IsString, MaxLength, MinLength } from 'class-validator';
import { PASSWORD_LENGTH } from '../passwords.js';
import { ROLES, type Role } from '../policy.js';

export class SignInDto {
  @ApiProperty({ format: 'email' })
  @IsString()
  @IsNotEmpty()
  @MaxLength(254)
  email: string;

  @ApiProperty({ format: 'password' })
  @IsString()
  @IsNotEmpty()
  @MaxLength(PASSWORD_LENGTH.max)
  password: string;

  @ApiPropertyOptional({ description: 'Code of the second factor; not looked at while the person has none' })
  @IsOptional()
  @IsString()
  @MaxLength(20)
  otp?: string;
}

export class ChangePasswordDto {
  @ApiProperty({ format: 'password' })
  @IsString()
  @IsNotEmpty()
  @MaxLength(PASSWORD_LENGTH.max)
  current: string;

  @ApiProperty({ format: 'password', minLength: PASSWORD_LENGTH.min, maxLength: PASSWORD_LENGTH.max })
  @IsString()
  @MinLength(PASSWORD_LENGTH.min)
  @MaxLength(PASSWORD_LENGTH.max)
  next: string;
}

export class SiteRoleDto {
  @ApiProperty()
  siteId: number;

  @ApiProperty({ enum: ROLES, enumName: 'Role' })
  role: Role;
}

export class SignedInUserDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  name: string;

  @ApiProperty()
  email: string;

  @ApiProperty({ description: 'May register sites without being administrator of one' })
  owner: boolean;

  @ApiProperty({ type: [SiteRoleDto] })
  roles: SiteRoleDto[];
}

export class SessionDto {
  @ApiProperty({ description: 'JWT for 15 minutes, to be sent as Authorization: Bearer …' })
  accessToken: string;

  @ApiProperty({ type: SignedInUserDto })
  user: SignedInUserDto;
}
