import { ApiProperty } from '@nestjs/swagger';
import { Transform } from 'class-transformer';
import { ArrayMaxSize, ArrayUnique, IsArray, IsNotEmpty, IsString, MaxLength } from 'class-validator';

export class ChecklistItemDto {
  @ApiProperty()
  key: string;

  @ApiProperty()
  text: string;
}

export class SiteChecklistDto {
  @ApiProperty()
  siteId: number;

  @ApiProperty({ type: [ChecklistItemDto], description: 'On every site; cannot be taken away' })
  always: ChecklistItemDto[];

  @ApiProperty({ type: [ChecklistItemDto], description: 'What the site’s administrator added' })
  own: ChecklistItemDto[];
}

export class ChangeChecklistDto {
  @ApiProperty({ type: [String], maxItems: 20, description: 'In order, each up to 300 characters' })
  @IsArray()
  @ArrayMaxSize(20)
  @ArrayUnique()
  @Transform(({ value }: { value: unknown }) =>
    Array.isArray(value)
      ? value.map((text: unknown) => (typeof text === 'string' ? text.trim() : text))
      : value,
  )
  @IsString({ each: true })
  @IsNotEmpty({ each: true })
  @MaxLength(300, { each: true })
  items: string[];
}
