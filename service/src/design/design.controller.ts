import { BadRequestException, Body, Controller, HttpCode, Post } from '@nestjs/common';
import { ApiBadRequestResponse, ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { bindingOf } from '../control/binding.js';
import { design, type DesignQuestion } from '../control/design.js';
import type { SimulatedMove } from '../control/move.js';
import { UnphysicalInputError } from '../control/plant.js';
import type { PolePattern } from '../control/pole-placement.js';
import { recommendGains } from '../control/recommendation.js';
import { designRemarks } from '../control/remarks.js';
import { ProblemDto } from '../problem.filter.js';
import { DesignAnswerDto, type MoveAnswerDto } from './dto/design-answer.dto.js';
import { BindingDto } from './dto/binding.dto.js';
import { DesignRequestDto } from './dto/design-request.dto.js';
import { LimitsRequestDto } from './dto/limits-request.dto.js';

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
    return refusingTheUnphysical(() => {
      const question: DesignQuestion = {
        ...request,
        // checked by kind in PatternDto
        pattern: request.pattern as PolePattern | undefined,
        feedForward: request.feedForward ?? false,
        holding: request.move?.holding ?? false,
      };
      const answer = design(question);
      const { sampleTime } = request.controller;
      return {
        ...answer,
        move: answer.move && moveAnswer(answer.move, sampleTime, request.move?.points),
        ...(request.remarks && { remarks: designRemarks(question, answer) }),
      };
    });
  }

  /** How fast λ may be for an axis: every limit's bound, what binds, and the λ that follows; nothing is stored. */
  @Post('limits')
  @HttpCode(200)
  @ApiOkResponse({ type: BindingDto })
  @ApiBadRequestResponse({ type: ProblemDto })
  limits(@Body() request: LimitsRequestDto): BindingDto {
    const { duration, settle = 1 } = request.move;
    if ((duration + settle) / request.controller.sampleTime > LONGEST_MOVE)
      throw new BadRequestException({
        errors: [{ path: 'move.duration', message: `the move is longer than ${LONGEST_MOVE} samples` }],
      });
    return refusingTheUnphysical(() =>
      bindingOf(
        recommendGains({
          ...request,
          pattern: request.pattern as PolePattern,
          feedForward: request.feedForward ?? false,
        }),
      ),
    );
  }
}

/** Samples of a move whose limits are still worked out: it is simulated hundreds of times. */
const LONGEST_MOVE = 20_000;

function refusingTheUnphysical<T>(work: () => T): T {
  try {
    return work();
  } catch (error) {
    if (error instanceof UnphysicalInputError)
      throw new BadRequestException({ errors: [{ path: error.path, message: error.message }] });
    throw error;
  }
}

function moveAnswer(
  { trajectory, trace, ...figures }: SimulatedMove,
  sampleTime: number,
  points = Infinity,
): MoveAnswerDto {
  const every = Math.max(1, Math.ceil(trajectory.target.length / points));
  const length = Math.ceil(trajectory.target.length / every);
  const thinned = (values: Float64Array): number[] => Array.from({ length }, (_, i) => values[i * every]!);
  return {
    ...figures,
    trace: {
      time: Array.from({ length }, (_, i) => i * every * sampleTime),
      target: thinned(trajectory.target),
      position: thinned(trace.position),
      velocity: thinned(trace.velocity),
      output: thinned(trace.output),
      integrator: thinned(trace.integrator),
    },
  };
}
