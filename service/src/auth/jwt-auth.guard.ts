import { Injectable, type ExecutionContext } from '@nestjs/common';
import { Reflector } from '@nestjs/core';
import { AuthGuard } from '@nestjs/passport';
import { AuthService } from './auth.service.js';
import { IS_PUBLIC } from './public.decorator.js';

/** Asks every HTTP route that is not `@Public()` for an access token. Socket namespaces check at their connection. */
@Injectable()
export class JwtAuthGuard extends AuthGuard('jwt') {
  constructor(
    private readonly reflector: Reflector,
    private readonly auth: AuthService,
  ) {
    super();
  }

  override canActivate(context: ExecutionContext) {
    if (context.getType() !== 'http') return true;
    if (this.reflector.getAllAndOverride<boolean>(IS_PUBLIC, [context.getHandler(), context.getClass()]))
      return true;
    return super.canActivate(context);
  }

  /** `error` is what the look-up of the person threw, `info` what passport-jwt has against the token. */
  override handleRequest<TUser>(error: unknown, user: TUser | false, info: unknown): TUser {
    if (error) throw error;
    if (!user) throw this.auth.refusal(info);
    return user;
  }
}
