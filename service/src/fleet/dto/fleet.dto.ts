import { ApiProperty } from '@nestjs/swagger';
import { NullableText } from '../../page.js';

export class StripDto {
  @ApiProperty()
  id: number;

  @ApiProperty({
    description:
      'Per second: [s since 1970, peak following error mm, peak output %, % of moving time at the limit]',
    type: 'array',
    items: { type: 'array', items: { type: 'number' } },
  })
  seconds: [number, number, number, number][];
}

export class StripsDto {
  @ApiProperty({ type: [StripDto] })
  items: StripDto[];

  @NullableText()
  nextCursor: string | null;
}

export class FleetSummaryDto {
  @ApiProperty({ description: 'Axes by state', type: 'object', additionalProperties: { type: 'number' } })
  counts: Record<string, number>;

  @ApiProperty()
  unacknowledgedAlerts: number;

  @ApiProperty()
  acknowledgedAlerts: number;

  @ApiProperty()
  openProposals: number;
}
