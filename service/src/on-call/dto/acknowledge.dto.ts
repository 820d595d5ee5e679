import { ApiProperty } from '@nestjs/swagger';
import { PRIORITIES, type Priority } from '../../alerts/alert.entity.js';
import { NullableText, NullableTime } from '../../page.js';

export const LINK_STATES = ['open', 'used', 'expired', 'over'] as const;
export type LinkState = (typeof LINK_STATES)[number];

/** What a link in a mail would acknowledge, and whether it still can. */
export class AcknowledgeLinkDto {
  @ApiProperty({
    enum: LINK_STATES,
    description: '`over`: the alert is no longer the one of the mail, or waits for nobody',
  })
  state: LinkState;

  @ApiProperty()
  alertId: number;

  @ApiProperty({ description: 'For whom the link acknowledges' })
  person: string;

  @ApiProperty()
  axisTag: string;

  @ApiProperty()
  axisName: string;

  @ApiProperty()
  machineName: string;

  @ApiProperty()
  siteName: string;

  @ApiProperty({ example: 'Europe/London' })
  timeZone: string;

  @ApiProperty()
  title: string;

  @ApiProperty({ enum: PRIORITIES })
  priority: Priority;

  @ApiProperty()
  message: string;

  @ApiProperty({ description: 'What to do' })
  action: string;

  @ApiProperty({ format: 'date-time' })
  raisedAt: string;

  @NullableText()
  acknowledgedBy: string | null;

  @NullableTime()
  acknowledgedAt: string | null;
}
