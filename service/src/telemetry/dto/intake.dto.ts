import { ApiProperty } from '@nestjs/swagger';
import { NullableNumber, NullableTime } from '../../page.js';

export class RefusalCountDto {
  @ApiProperty({ example: 'time-ahead' })
  reason: string;

  @ApiProperty()
  count: number;
}

export class GatewayIntakeDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  siteId: number;

  @ApiProperty()
  name: string;

  @ApiProperty({ enum: ['socket', 'http'], nullable: true, description: 'null: not connected' })
  via: 'socket' | 'http' | null;

  @NullableTime()
  lastSeenAt: Date | null;

  @ApiProperty({ description: 'Axes that hello answered' })
  axes: number;

  @ApiProperty({ description: 'Per second, over the last ten' })
  messagesPerSecond: number;

  @ApiProperty({ description: 'Per second, over the last ten' })
  samplesPerSecond: number;

  @NullableNumber('Age of the newest sample taken, s')
  lag: number | null;

  @NullableNumber(
    'Newest sample’s time minus its arrival, s, of the least delayed message of the last minute: positive when the gateway’s clock is ahead, negative when samples come late or the clock is behind',
  )
  clockOffset: number | null;

  @ApiProperty({ description: 'Times that the sequence skipped, since the service started' })
  gaps: number;

  @ApiProperty({ description: 'Messages that came again, since the service started' })
  duplicates: number;

  @ApiProperty({
    description: 'Samples not later than what their axis had, not taken, since the service started',
  })
  droppedSamples: number;

  @ApiProperty({ type: [RefusalCountDto], description: 'Since the service started, most frequent first' })
  refusals: RefusalCountDto[];

  @ApiProperty({ description: 'Bytes of its messages that wait' })
  queueBytes: number;

  @ApiProperty({ description: 'Time between messages that it was asked for, ms; 0 if it sends as it likes' })
  keepEveryMs: number;
}

export class IntakeDto {
  @ApiProperty({ description: 'Now by the service' })
  at: Date;

  @ApiProperty({ description: 'Since when what is counted was counted' })
  since: Date;

  @ApiProperty({ description: 'Bytes of messages that wait' })
  queueBytes: number;

  @ApiProperty({ description: 'Messages that wait' })
  queueMessages: number;

  @ApiProperty({ description: 'Longest wait of a message within the last second, s' })
  lag: number;

  @NullableNumber('The last checkpoint took so long, s')
  lastCheckpoint: number | null;

  @ApiProperty({ description: 'Longest checkpoint since the service started, s' })
  longestCheckpoint: number;

  @ApiProperty({ description: 'Checkpoints that failed in a row until now; 0 when the last one was written' })
  failedCheckpoints: number;

  @ApiProperty({ type: [GatewayIntakeDto] })
  gateways: GatewayIntakeDto[];
}
