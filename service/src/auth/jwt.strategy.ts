import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { PassportStrategy } from '@nestjs/passport';
import { ExtractJwt, Strategy } from 'passport-jwt';
import type { Settings } from '../settings.js';
import { JWT_ALGORITHM, JWT_ISSUER } from './access-token.js';
import { AuthService, type AccessClaims } from './auth.service.js';
import type { SignedInUser } from './signed-in-user.js';

/** Reads `Authorization: Bearer …` and looks the person up anew at each request. */
@Injectable()
export class JwtStrategy extends PassportStrategy(Strategy) {
  constructor(
    config: ConfigService<Settings, true>,
    private readonly auth: AuthService,
  ) {
    super({
      jwtFromRequest: ExtractJwt.fromAuthHeaderAsBearerToken(),
      secretOrKey: config.get('JWT_SECRET', { infer: true }),
      algorithms: [JWT_ALGORITHM],
      issuer: JWT_ISSUER,
    });
  }

  validate(claims: AccessClaims): Promise<SignedInUser> {
    return this.auth.userOfClaims(claims);
  }
}
