import { applyDecorators } from '@nestjs/common';
import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Type } from 'class-transformer';
import { IsInt, IsOptional, IsString, Max, Min, ValidateIf } from 'class-validator';

/** `limit` and `cursor` of every list. */
export class PageQuery {
  @ApiPropertyOptional({ minimum: 1, maximum: 1000, default: 100 })
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  @Min(1)
  @Max(1000)
  limit: number = 100;

  @ApiPropertyOptional({ description: 'From the former answer’s nextCursor' })
  @IsOptional()
  @IsString()
  cursor?: string;
}

/** A field that may be left out of a change, but is not null: `IsOptional` lets null through. */
export const MayBeLeftOut = (): PropertyDecorator =>
  ValidateIf((_object: unknown, value: unknown) => value !== undefined);

/** A page of a list, and where the next one starts; null at the end. */
export interface Page<T> {
  items: T[];
  nextCursor: string | null;
}

type Constructor<T> = new () => T;

/** The DTO class of a page of `Item`. */
export function PageOf<T>(Item: Constructor<T>, name: string): Constructor<Page<T>> {
  class PageDto implements Page<T> {
    @ApiProperty({ type: [Item] })
    items: T[];

    @ApiProperty({ type: String, nullable: true })
    nextCursor: string | null;
  }
  Object.defineProperty(PageDto, 'name', { value: name });
  return PageDto;
}

/** Cuts one page out of rows that were read with one more than asked for. */
export function pageOf<Row, T>(
  rows: Row[],
  limit: number,
  cursorOf: (row: Row) => string,
  toDto: (row: Row) => T,
): Page<T> {
  const items = rows.slice(0, limit);
  return { items: items.map(toDto), nextCursor: rows.length > limit ? cursorOf(items.at(-1)!) : null };
}

/** A number that may be missing. */
export const NullableNumber = (description?: string): PropertyDecorator =>
  applyDecorators(ApiProperty({ type: Number, nullable: true, ...(description && { description }) }));

/** A time that may be missing. */
export const NullableTime = (description?: string): PropertyDecorator =>
  applyDecorators(
    ApiProperty({ type: String, format: 'date-time', nullable: true, ...(description && { description }) }),
  );

/** A text that may be missing. */
export const NullableText = (description?: string): PropertyDecorator =>
  applyDecorators(ApiProperty({ type: String, nullable: true, ...(description && { description }) }));
