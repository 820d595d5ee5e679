import { createParamDecorator, type ExecutionContext } from '@nestjs/common';
import type { Request } from 'express';
import type { SignedInUser } from './signed-in-user.js';

/** The signed-in person, as the JWT strategy put it on the request. */
export const CurrentUser = createParamDecorator(
  (_: unknown, context: ExecutionContext) =>
    context.switchToHttp().getRequest<Request>().user as SignedInUser,
);
