import { BadRequestException, Body, Controller, HttpCode, Post } from '@nestjs/common';
import { ApiBadRequestResponse, ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { design } from '../control/design.js';
import { type SimulatedMove } from '../control/move.js';
import { UnphysicalInputError } from '../control/plant.js';
import type { PolePattern } from '../control/pole-placement.js';
import { ProblemDto } from '../problem.filter.js';
import { DesignAnswerDto, type MoveAnswerDto } from './dto/design-answer.dto.js';
import { DesignRequestDto } from './dto/design-request.dto.js';

@ApiTags('design')
@ApiBearerAuth()
@Controller('design')
export class DesignController {
  /** Gains by pole placement (or given ones) and everything that follows from them; nothing is stored. */
  @Post()
  @HttpCode(200)
  @ApiOkResponse({ type: DesignAnswerDto })
  @ApiBadRequestResponse({ type: ProblemDto })
  calculate(@Body() request: DesignRequestDto): DesignAnswerDto {
    try {
      const answer = design({
        ...request,
        // checked by kind in PatternDto
        pattern: request.pattern as PolePattern | undefined,
        feedForward: request.feedForward ?? false,
      });
      const { sampleTime } = request.controller;
      return { ...answer, move: answer.move && moveAnswer(answer.move, sampleTime) };
    } catch (error) {
      if (error instanceof UnphysicalInputError)
        throw new BadRequestException({ errors: [{ path: error.path, message: error.message }] });
      throw error;
    }
  }
}

function moveAnswer({ trajectory, trace, ...figures }: SimulatedMove, sampleTime: number): MoveAnswerDto {
  return {
    ...figures,
    trace: {
      time: Array.from(trajectory.target, (_, k) => k * sampleTime),
      target: Array.from(trajectory.target),
      position: Array.from(trace.position),
      velocity: Array.from(trace.velocity),
      output: Array.from(trace.output),
      integrator: Array.from(trace.integrator),
    },
  };
}
