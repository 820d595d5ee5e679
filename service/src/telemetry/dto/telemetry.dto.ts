import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { ArrayMaxSize, IsArray, IsString, Length } from 'class-validator';
import { GainsDto } from '../../fleet/dto/axis-sheet.dto.js';
import { STRUCTURES, type Gains, type Structure } from '../../control/pole-placement.js';
import { MAX_AXES, MAX_EPOCH_LENGTH } from '../gateway-sessions.service.js';

export class HelloDto {
  @ApiProperty({ type: [String], description: 'Tags of the axes that the gateway serves' })
  @IsArray()
  @ArrayMaxSize(MAX_AXES)
  @IsString({ each: true })
  axes: string[];

  @ApiProperty({ description: 'New whenever the gateway has lost its buffer and counts from 1 again' })
  @IsString()
  @Length(1, MAX_EPOCH_LENGTH)
  epoch: string;
}

class GreetedAxisDto {
  @ApiProperty()
  tag: string;

  @ApiProperty({ description: 'The axis index of its blocks' })
  index: number;

  @ApiProperty()
  id: number;

  @ApiProperty({ description: 'mm per count' })
  resolution: number;

  @ApiProperty({ type: GainsDto, nullable: true })
  gains: Gains | null;

  @ApiProperty()
  revision: number;

  @ApiProperty({ enum: STRUCTURES })
  structure: Structure;

  @ApiProperty()
  maintenance: boolean;
}

export class HelloAnswerDto {
  @ApiProperty({ type: [GreetedAxisDto] })
  axes: GreetedAxisDto[];

  @ApiProperty({ description: 'Everything up to it survives a crash of the service' })
  durableSequence: number;

  @ApiProperty({ type: [String], description: 'Tags that the gateway’s site does not have' })
  unknown: string[];
}

export class FrameAnswerDto {
  @ApiPropertyOptional({ description: 'The sequence taken, also of a message that was taken before' })
  received?: number;

  @ApiPropertyOptional({ description: 'Why the whole message was refused: a stable word, a colon, the rest' })
  rejected?: string;

  @ApiPropertyOptional({ type: Number, nullable: true, description: 'Beside rejected; null if unreadable' })
  sequence?: number | null;
}

export class DurableDto {
  @ApiProperty({ description: 'Everything up to it may be forgotten' })
  sequence: number;
}
