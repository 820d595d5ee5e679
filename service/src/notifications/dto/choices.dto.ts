import { ApiProperty } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import {
  IsBoolean,
  IsNotEmpty,
  IsObject,
  IsString,
  IsUrl,
  Matches,
  MaxLength,
  ValidateIf,
  ValidateNested,
} from 'class-validator';
import { NullableText } from '../../page.js';

const BASE64URL = /^[A-Za-z0-9_-]+={0,2}$/;

export class SetChoicesDto {
  @ApiProperty({ description: 'One mail each morning about the sites on which one is an engineer' })
  @IsBoolean()
  dailyDigest: boolean;

  @NullableText('For SMS, in the form of ITU-T E.164: +441632960123')
  @ValidateIf(({ phone }: SetChoicesDto) => phone !== null)
  @Matches(/^\+[1-9]\d{6,14}$/, { message: 'phone must be a number such as +441632960123' })
  phone: string | null;

  @ApiProperty({ description: 'Alerts also by SMS, where the installation offers it' })
  @IsBoolean()
  smsAlerts: boolean;
}

export class SubscriptionDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  endpoint: string;

  @ApiProperty({ example: 'Firefox on Android' })
  browser: string;

  @ApiProperty({ format: 'date-time' })
  createdAt: string;
}

export class ChoicesDto extends SetChoicesDto {
  @ApiProperty({ description: 'Whether this installation sends SMS' })
  smsOffered: boolean;

  @ApiProperty({ description: 'What a browser needs to subscribe to push messages (RFC 8292)' })
  pushKey: string;

  @ApiProperty({ type: [SubscriptionDto], description: 'Browsers that show push messages' })
  subscriptions: SubscriptionDto[];
}

export class SubscriptionKeysDto {
  @ApiProperty()
  @IsString()
  @MaxLength(200)
  @Matches(BASE64URL)
  p256dh: string;

  @ApiProperty()
  @IsString()
  @MaxLength(100)
  @Matches(BASE64URL)
  auth: string;
}

export class SubscribeDto {
  @ApiProperty({ description: "Where the browser's maker takes messages for it" })
  @IsUrl({ protocols: ['https'], require_protocol: true, require_tld: true, allow_underscores: false })
  @Matches(/^https:\/\/[^/]*[a-z][^/]*\//i, { message: 'endpoint must name a host, not an address' })
  @MaxLength(1_000)
  endpoint: string;

  @ApiProperty({ type: SubscriptionKeysDto })
  @IsObject()
  @ValidateNested()
  @Type(() => SubscriptionKeysDto)
  keys: SubscriptionKeysDto;

  @ApiProperty({ example: 'Firefox on Android' })
  @IsString()
  @IsNotEmpty()
  @MaxLength(100)
  browser: string;
}
