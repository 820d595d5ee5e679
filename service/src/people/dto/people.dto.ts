import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  ArrayMaxSize,
  ArrayMinSize,
  ArrayUnique,
  IsArray,
  IsBoolean,
  IsEmail,
  IsIn,
  IsInt,
  IsNotEmpty,
  IsOptional,
  IsString,
  MaxLength,
  MinLength,
  ValidateNested,
} from 'class-validator';
import { SiteRoleDto } from '../../auth/dto/auth.dto.js';
import { PASSWORD_LENGTH } from '../../auth/passwords.js';
import { ROLES, type Role } from '../../auth/policy.js';
import { INVITATION_PURPOSES, type InvitationPurpose } from '../invitation.entity.js';

export class GiveRoleDto {
  @ApiProperty()
  @IsInt()
  siteId: number;

  @ApiProperty({ enum: ROLES, enumName: 'Role' })
  @IsIn(ROLES)
  role: Role;
}

export class InviteDto {
  @ApiProperty({ format: 'email' })
  @IsEmail()
  @MaxLength(254)
  email: string;

  @ApiProperty()
  @IsString()
  @IsNotEmpty()
  @MaxLength(100)
  name: string;

  @ApiProperty({ type: [GiveRoleDto], description: 'One role per site' })
  @IsArray()
  @ArrayMinSize(1)
  @ArrayMaxSize(500)
  @ArrayUnique((role: GiveRoleDto) => role.siteId)
  @ValidateNested({ each: true })
  @Type(() => GiveRoleDto)
  roles: GiveRoleDto[];
}

export class ChangePersonDto {
  @ApiPropertyOptional({ type: [GiveRoleDto], description: 'All roles on the sites that you administer' })
  @IsOptional()
  @IsArray()
  @ArrayMaxSize(500)
  @ArrayUnique((role: GiveRoleDto) => role.siteId)
  @ValidateNested({ each: true })
  @Type(() => GiveRoleDto)
  roles?: GiveRoleDto[];

  @ApiPropertyOptional()
  @IsOptional()
  @IsBoolean()
  disabled?: boolean;
}

export class RequestResetDto {
  @ApiProperty({ format: 'email' })
  @IsString()
  @IsNotEmpty()
  @MaxLength(254)
  email: string;
}

export class AcceptInvitationDto {
  @ApiPropertyOptional({ description: 'As the person wants to be named; not needed for a new password' })
  @IsOptional()
  @IsString()
  @MaxLength(100)
  name?: string;

  @ApiProperty({ format: 'password', minLength: PASSWORD_LENGTH.min, maxLength: PASSWORD_LENGTH.max })
  @IsString()
  @MinLength(PASSWORD_LENGTH.min)
  @MaxLength(PASSWORD_LENGTH.max)
  password: string;

  @ApiPropertyOptional({ format: 'email', description: 'Only where the invitation names none' })
  @IsOptional()
  @IsEmail()
  @MaxLength(254)
  email?: string;
}

export class NamedRoleDto extends SiteRoleDto {
  @ApiProperty()
  siteName: string;
}

export class PersonDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  name: string;

  @ApiProperty()
  email: string;

  @ApiProperty({ type: [NamedRoleDto], description: 'On the sites that you administer' })
  roles: NamedRoleDto[];

  @ApiProperty()
  disabled: boolean;

  @ApiProperty({ type: String, format: 'date-time', nullable: true })
  lastSignInAt: string | null;

  @ApiProperty({ description: 'An invitation to a further site is open' })
  invited: boolean;
}

export class PeopleDto {
  @ApiProperty({ type: [PersonDto] })
  items: PersonDto[];

  @ApiProperty({ type: String, nullable: true })
  nextCursor: string | null;
}

export class InvitationDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  email: string;

  @ApiProperty()
  name: string;

  @ApiProperty({ type: [SiteRoleDto] })
  roles: SiteRoleDto[];

  @ApiProperty({ format: 'date-time' })
  expiresAt: string;
}

export class InvitationsDto {
  @ApiProperty({ type: [InvitationDto] })
  items: InvitationDto[];

  @ApiProperty({ type: String, nullable: true })
  nextCursor: string | null;
}

export class OfferedRoleDto {
  @ApiProperty()
  siteName: string;

  @ApiProperty({ enum: ROLES, enumName: 'Role' })
  role: Role;
}

export class InvitationViewDto {
  @ApiProperty({ enum: INVITATION_PURPOSES })
  purpose: InvitationPurpose;

  @ApiProperty()
  name: string;

  @ApiProperty({ type: String, nullable: true, description: 'null: whoever accepts names it' })
  email: string | null;

  @ApiProperty({ description: 'The address has an account: give its present password' })
  existing: boolean;

  @ApiProperty({ type: [OfferedRoleDto] })
  siteRoles: OfferedRoleDto[];
}
