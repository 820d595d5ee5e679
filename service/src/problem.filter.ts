import { Catch, HttpException, Logger, type ArgumentsHost, type ExceptionFilter } from '@nestjs/common';
import { ApiProperty } from '@nestjs/swagger';
import type { ValidationError } from 'class-validator';
import type { Request, Response } from 'express';
import { STATUS_CODES } from 'node:http';

export class FieldProblem {
  @ApiProperty({ description: 'Where, such as "plant.gain"' })
  path: string;

  @ApiProperty()
  message: string;
}

/** RFC 9457 problem details. */
export class ProblemDto {
  @ApiProperty({ example: 'about:blank' })
  type: string;

  @ApiProperty()
  title: string;

  @ApiProperty()
  status: number;

  @ApiProperty({ description: 'What happened, in plain words' })
  detail: string;

  @ApiProperty({ type: [FieldProblem], required: false })
  errors?: FieldProblem[];
}

/** Turns class-validator's tree into paths and messages: `[{ path: "move.distance", message: … }]`. */
export function fieldProblems(errors: ValidationError[], parent = ''): FieldProblem[] {
  return errors.flatMap((error) => {
    const path = parent ? `${parent}.${error.property}` : error.property;
    const own = Object.values(error.constraints ?? {}).map((message) => ({ path, message }));
    return [...own, ...fieldProblems(error.children ?? [], path)];
  });
}

/** Answers every failed request as `application/problem+json`; what was not foreseen is logged and says no more than 500. */
@Catch()
export class ProblemFilter implements ExceptionFilter {
  private readonly log = new Logger('Problem');

  catch(exception: unknown, host: ArgumentsHost): void {
    if (host.getType() !== 'http') throw exception;
    const http = host.switchToHttp();
    const response = http.getResponse<Response>();
    const status = statusOf(exception);
    if (status >= 500) {
      const { method, url } = http.getRequest<Request>();
      this.log.error(`${method} ${url}`, exception instanceof Error ? exception.stack : String(exception));
    }
    const title = STATUS_CODES[status] ?? 'Error';
    const problem: ProblemDto = { type: 'about:blank', title, status, detail: title };
    if (exception instanceof HttpException) {
      const body = exception.getResponse();
      if (typeof body === 'string') problem.detail = body;
      else {
        const { message, errors, ...rest } = body as {
          message?: string | string[];
          errors?: FieldProblem[];
          error?: unknown;
          statusCode?: unknown;
        };
        delete rest.error;
        delete rest.statusCode;
        Object.assign(problem, rest);
        problem.detail = Array.isArray(message) ? message.join('; ') : (message ?? title);
        if (errors) {
          problem.errors = errors;
          problem.detail =
            message && !Array.isArray(message)
              ? message
              : errors.map((e) => `${e.path}: ${e.message}`).join('; ');
        }
      }
    } else if (status < 500 && exception instanceof Error) problem.detail = exception.message;
    if (response.headersSent) return void response.end();
    response.status(status).type('application/problem+json').send(JSON.stringify(problem));
  }
}

/** Express's own errors (a body that is not JSON, too large) carry their status. */
function statusOf(exception: unknown): number {
  if (exception instanceof HttpException) return exception.getStatus();
  const status = (exception as { status?: unknown } | null)?.status;
  return typeof status === 'number' && status >= 400 && status < 500 ? status : 500;
}
