import { Module } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { APP_GUARD, APP_INTERCEPTOR } from '@nestjs/core';
import { JwtModule } from '@nestjs/jwt';
import { PassportModule } from '@nestjs/passport';
import { TypeOrmModule } from '@nestjs/typeorm';
import { jwtOptions } from './access-token.js';
import { AuthController } from './auth.controller.js';
import { AuthService } from './auth.service.js';
import { JwtAuthGuard } from './jwt-auth.guard.js';
import { JwtStrategy } from './jwt.strategy.js';
import { RefreshToken } from './refresh-token.entity.js';
import { RetryAfterInterceptor } from './retry-after.interceptor.js';
import { SessionsService } from './sessions.service.js';
import { SignInLimiter } from './sign-in-limiter.js';

@Module({
  imports: [
    PassportModule,
    JwtModule.registerAsync({ inject: [ConfigService], useFactory: jwtOptions }),
    TypeOrmModule.forFeature([RefreshToken]),
  ],
  controllers: [AuthController],
  providers: [
    AuthService,
    SessionsService,
    SignInLimiter,
    JwtStrategy,
    { provide: APP_GUARD, useClass: JwtAuthGuard },
    { provide: APP_INTERCEPTOR, useClass: RetryAfterInterceptor },
  ],
  exports: [AuthService, SessionsService],
})
export class AuthModule {}
