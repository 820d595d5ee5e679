import { ConfigService } from '@nestjs/config';
import type { JwtModuleOptions } from '@nestjs/jwt';
import type { Settings } from '../settings.js';

export const JWT_ALGORITHM = 'HS256';
export const JWT_ISSUER = 'polewright';
/** s; short, since it cannot be taken back by the one who carries it away */
export const ACCESS_LIFETIME = 15 * 60;

/** How access tokens are signed and checked: one algorithm only, whatever a token claims. */
export const jwtOptions = (config: ConfigService<Settings, true>): JwtModuleOptions => ({
  secret: config.get('JWT_SECRET', { infer: true }),
  signOptions: { algorithm: JWT_ALGORITHM, issuer: JWT_ISSUER, expiresIn: ACCESS_LIFETIME },
  verifyOptions: { algorithms: [JWT_ALGORITHM], issuer: JWT_ISSUER },
});
