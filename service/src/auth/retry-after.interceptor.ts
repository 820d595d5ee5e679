import { Injectable, type CallHandler, type ExecutionContext, type NestInterceptor } from '@nestjs/common';
import type { Response } from 'express';
import { catchError, type Observable } from 'rxjs';
import { TooManyAttemptsException } from './sign-in-limiter.js';

/** Puts the waiting time of a refused password check into the `Retry-After` header (RFC 9110, 10.2.3). */
@Injectable()
export class RetryAfterInterceptor implements NestInterceptor {
  intercept(context: ExecutionContext, next: CallHandler): Observable<unknown> {
    return next.handle().pipe(
      catchError((error: unknown) => {
        if (error instanceof TooManyAttemptsException && context.getType() === 'http')
          context.switchToHttp().getResponse<Response>().setHeader('Retry-After', String(error.retryAfter));
        throw error;
      }),
    );
  }
}
