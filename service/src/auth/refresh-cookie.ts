import type { CookieOptions, Request, Response } from 'express';
import { REFRESH_LIFETIME } from './sessions.service.js';

const NAME = 'polewright_refresh';

/** Out of reach of scripts and of other sites, and sent to the sign-in routes only. */
const options = (publicUrl: string): CookieOptions => ({
  httpOnly: true,
  sameSite: 'strict',
  secure: publicUrl.startsWith('https:'),
  path: '/api/v1/auth',
});

export const refreshTokenOf = (request: Request): string | undefined => {
  const cookies = request.cookies as Record<string, unknown> | undefined;
  const value = cookies?.[NAME];
  return typeof value === 'string' ? value : undefined;
};

export const setRefreshCookie = (response: Response, token: string, publicUrl: string): void =>
  void response.cookie(NAME, token, { ...options(publicUrl), maxAge: REFRESH_LIFETIME });

export const clearRefreshCookie = (response: Response, publicUrl: string): void =>
  void response.clearCookie(NAME, options(publicUrl));
